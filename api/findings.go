package api

import (
	"context"
	"fmt"
	"math"
	"strconv"
	"strings"

	"fettle.example/fettle/triage"
)

// ListDetectors lists the rules.
func (s *Server) ListDetectors(context.Context, ListDetectorsRequestObject) (ListDetectorsResponseObject, error) {
	return ListDetectors200JSONResponse{Items: each(triage.Catalogue(), func(d triage.Detector) Detector {
		return Detector{Name: d.Name, Family: d.Family, Kind: TaskKind(d.Kind), Says: d.Says}
	})}, nil
}

// ListFindings lists what looks suspicious. The cursor is the bits of the last gain, and the finding's number.
func (s *Server) ListFindings(ctx context.Context, r ListFindingsRequestObject) (ListFindingsResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	q := r.Params
	limit := pageSize(q.Limit)
	f := triage.Filter{Detector: value(q.Detector), Family: value(q.Family), Kind: string(value(q.Kind)), Limit: limit + 1}
	if q.Segment != nil {
		if f.Segment, err = readID(*q.Segment, "segment"); err != nil {
			return nil, err
		}
	}
	if q.Cursor != nil {
		if f.Before, err = readMark(*q.Cursor); err != nil {
			return nil, err
		}
	}
	list, err := triage.Findings(ctx, v, f)
	if err != nil {
		return nil, err
	}
	var out ListFindings200JSONResponse
	if len(list) > limit {
		list = list[:limit]
		last := list[limit-1]
		next := fmt.Sprintf("%x.%d", math.Float64bits(last.Gain), last.ID)
		out.Next = &next
	}
	out.Items = each(list, toFinding)
	return out, nil
}

func readMark(cursor string) (*triage.Mark, error) {
	gain, id, _ := strings.Cut(cursor, ".")
	bits, err1 := strconv.ParseUint(gain, 16, 64)
	n, err2 := strconv.ParseInt(id, 10, 64)
	if err1 != nil || err2 != nil {
		return nil, badCursor()
	}
	return &triage.Mark{Gain: math.Float64frombits(bits), ID: n}, nil
}
