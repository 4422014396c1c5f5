package api

import (
	"context"
	"strings"

	"github.com/google/uuid"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
)

// readKey reads an Idempotency-Key: a UUID, in quotes as the IETF draft has it (a structured-field string) or bare.
func readKey(text string) (uuid.UUID, error) {
	id, err := uuid.Parse(strings.Trim(text, `"`))
	if err != nil || id == uuid.Nil {
		return id, fault.New(fault.Invalid, "key-malformed", "the Idempotency-Key is not a UUID").WithField("Idempotency-Key").
			WithNext("make a UUID once for what is to be done, and keep it through every repeat")
	}
	return id, nil
}

// draft begins a draft in the caller's name.
func draft(ctx context.Context, expected []string, reason *string) (ledger.Draft, error) {
	ids, err := readIDs(expected, "expected")
	return ledger.Draft{ID: uuid.New(), Person: caller(ctx).Handle, Agent: agent(ctx), Reason: value(reason), Expected: ids}, err
}

// seed finds the supervoxel that is meant: by its id, or as the nearest to a point in the segments that the person saw.
func seed(ctx context.Context, v *ledger.Volume, sd Seed, expected []ledger.ID, field string) (ledger.ID, error) {
	switch {
	case (sd.Supervoxel == nil) == (sd.PointNm == nil):
		return 0, fault.New(fault.Invalid, "seed-malformed", "a seed is a supervoxel or a point: one of the two").WithField(field)
	case sd.Supervoxel != nil:
		return readID(*sd.Supervoxel, field)
	}
	var best ledger.Near
	for i, segment := range expected {
		n, err := v.Nearest(ctx, segment, base.Point((*sd.PointNm)[:3]))
		if err != nil {
			return 0, err
		}
		if i == 0 || n.Distance < best.Distance {
			best = n
		}
	}
	return best.Supervoxel, nil
}

func mergeDraft(ctx context.Context, v *ledger.Volume, r MergeRequest) (ledger.Draft, error) {
	d, err := draft(ctx, r.Expected, r.Reason)
	if err != nil {
		return d, err
	}
	d.Merge = new(ledger.Merge)
	if d.Merge.A, err = seed(ctx, v, r.A, d.Expected, "a"); err != nil {
		return d, err
	}
	d.Merge.B, err = seed(ctx, v, r.B, d.Expected, "b")
	return d, err
}

func splitDraft(ctx context.Context, v *ledger.Volume, r SplitRequest) (ledger.Draft, error) {
	d, err := draft(ctx, r.Expected, r.Reason)
	if err != nil {
		return d, err
	}
	d.Split = &ledger.Split{Groups: make([][]ledger.ID, len(r.Groups))}
	for i, group := range r.Groups {
		for _, sd := range group {
			id, err := seed(ctx, v, sd, d.Expected, "groups")
			if err != nil {
				return d, err
			}
			d.Split.Groups[i] = append(d.Split.Groups[i], id)
		}
	}
	return d, nil
}

// post posts a draft under the id that the Idempotency-Key names.
func (s *Server) post(ctx context.Context, volume, key string, d ledger.Draft) (Entry, error) {
	var err error
	if d.ID, err = readKey(key); err != nil {
		return Entry{}, err
	}
	e, err := s.Queue.Post(ctx, volume, caller(ctx), d)
	return toEntry(e), err
}

// PostMerge joins two segments.
func (s *Server) PostMerge(ctx context.Context, r PostMergeRequestObject) (PostMergeResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	d, err := mergeDraft(ctx, v, *r.Body)
	if err != nil {
		return nil, err
	}
	e, err := s.post(ctx, r.Volume, r.Params.IdempotencyKey, d)
	return PostMerge201JSONResponse(e), err
}

// PreviewMerge says what a merge would make.
func (s *Server) PreviewMerge(ctx context.Context, r PreviewMergeRequestObject) (PreviewMergeResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	d, err := mergeDraft(ctx, v, *r.Body)
	if err != nil {
		return nil, err
	}
	p, err := v.PreviewMerge(ctx, d)
	if err != nil {
		return nil, err
	}
	return PreviewMerge200JSONResponse{A: d.Merge.A.String(), B: d.Merge.B.String(), Segments: each(p.Segments, toCurrent), Totals: toTotals(p.Totals),
		DistanceNm: p.Distance, Affinity: p.Affinity}, nil
}

// PostSplit parts a segment.
func (s *Server) PostSplit(ctx context.Context, r PostSplitRequestObject) (PostSplitResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	d, err := splitDraft(ctx, v, *r.Body)
	if err != nil {
		return nil, err
	}
	e, err := s.post(ctx, r.Volume, r.Params.IdempotencyKey, d)
	return PostSplit201JSONResponse(e), err
}

// PreviewSplit says what a split would make.
func (s *Server) PreviewSplit(ctx context.Context, r PreviewSplitRequestObject) (PreviewSplitResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	d, err := splitDraft(ctx, v, *r.Body)
	if err != nil {
		return nil, err
	}
	p, err := v.PreviewSplit(ctx, d)
	if err != nil {
		return nil, err
	}
	out := PreviewSplit200JSONResponse{Segment: toCurrent(p.Segment), Groups: each(d.Split.Groups, toIDs), Cut: toEdges(p.Cut), Cost: p.Cost,
		Ambiguous: p.Ambiguous, Warnings: append([]string{}, p.Warnings...)}
	out.Sides = each(p.Sides, func(sd ledger.Side) Side {
		return Side{Group: sd.Group, Totals: toTotals(sd.Totals), CableNm: sd.Cable, First: sd.First.String()}
	})
	return out, nil
}

// PostReversal undoes an entry.
func (s *Server) PostReversal(ctx context.Context, r PostReversalRequestObject) (PostReversalResponseObject, error) {
	d, err := draft(ctx, r.Body.Expected, r.Body.Reason)
	if err != nil {
		return nil, err
	}
	d.Reversal = &ledger.Reversal{Position: r.Body.Position}
	e, err := s.post(ctx, r.Volume, r.Params.IdempotencyKey, d)
	return PostReversal201JSONResponse(e), err
}
