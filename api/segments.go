package api

import (
	"context"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
)

// LookUp tells the segments of many supervoxels.
func (s *Server) LookUp(ctx context.Context, r LookUpRequestObject) (LookUpResponseObject, error) {
	items, err := s.lookUp(ctx, r.Volume, r.Body.Supervoxels, r.Body.At)
	return LookUp200JSONResponse{Items: items}, err
}

// GetSupervoxel tells the segment of one.
func (s *Server) GetSupervoxel(ctx context.Context, r GetSupervoxelRequestObject) (GetSupervoxelResponseObject, error) {
	items, err := s.lookUp(ctx, r.Volume, []string{r.Supervoxel}, r.Params.At)
	if err != nil {
		return nil, err
	}
	return GetSupervoxel200JSONResponse(items[0]), nil
}

func (s *Server) lookUp(ctx context.Context, volume string, supervoxels []string, at *string) ([]LookupItem, error) {
	v, when, err := s.volumeAt(ctx, volume, at)
	if err != nil {
		return nil, err
	}
	ids, err := readIDs(supervoxels, "supervoxels")
	if err != nil {
		return nil, err
	}
	segments, err := v.SegmentsOf(ctx, ids, when)
	if err != nil {
		return nil, err
	}
	items := make([]LookupItem, len(ids))
	for i := range ids {
		items[i] = LookupItem{Supervoxel: supervoxels[i], Segment: segments[i].String()}
	}
	return items, nil
}

// GetNearest finds the supervoxel nearest to a point.
func (s *Server) GetNearest(ctx context.Context, r GetNearestRequestObject) (GetNearestResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	var within ledger.ID
	if r.Params.Segment != nil {
		if within, err = readID(*r.Params.Segment, "segment"); err != nil {
			return nil, err
		}
	}
	n, err := v.Nearest(ctx, within, base.Point{r.Params.X, r.Params.Y, r.Params.Z})
	return GetNearest200JSONResponse{Supervoxel: n.Supervoxel.String(), Segment: n.Segment.String(), DistanceNm: n.Distance}, err
}

// segment opens a volume and reads a segment's id.
func (s *Server) segment(ctx context.Context, volume, text string) (*ledger.Volume, ledger.ID, error) {
	id, err := readID(text, "segment")
	if err != nil {
		return nil, 0, err
	}
	v, err := s.Ledger.Volume(ctx, volume)
	return v, id, err
}

// GetSegment tells what a segment holds or held.
func (s *Server) GetSegment(ctx context.Context, r GetSegmentRequestObject) (GetSegmentResponseObject, error) {
	v, id, err := s.segment(ctx, r.Volume, r.Segment)
	if err != nil {
		return nil, err
	}
	seg, err := v.Segment(ctx, id)
	if err != nil {
		return nil, err
	}
	became, err := v.Became(ctx, id)
	return GetSegment200JSONResponse(toSegment(seg, became)), err
}

// ListMembers lists the supervoxels of a current segment. The cursor is the last one of the page before.
func (s *Server) ListMembers(ctx context.Context, r ListMembersRequestObject) (ListMembersResponseObject, error) {
	v, id, err := s.segment(ctx, r.Volume, r.Segment)
	if err != nil {
		return nil, err
	}
	var after ledger.ID
	if r.Params.Cursor != nil {
		if after, err = readID(*r.Params.Cursor, "cursor"); err != nil {
			return nil, err
		}
	}
	limit := pageSize(r.Params.Limit)
	ids, err := v.Members(ctx, id, after, limit+1)
	if err != nil {
		return nil, err
	}
	var out ListMembers200JSONResponse
	if len(ids) > limit {
		ids = ids[:limit]
		next := ids[limit-1].String()
		out.Next = &next
	}
	out.Items = toIDs(ids)
	return out, nil
}

// GetSegmentHistory lists the entries that a segment's content came through.
func (s *Server) GetSegmentHistory(ctx context.Context, r GetSegmentHistoryRequestObject) (GetSegmentHistoryResponseObject, error) {
	v, id, err := s.segment(ctx, r.Volume, r.Segment)
	if err != nil {
		return nil, err
	}
	list, err := v.SegmentEntries(ctx, id)
	if err != nil {
		return nil, err
	}
	page, err := historyPage(list, r.Params.Cursor, r.Params.Limit)
	return GetSegmentHistory200JSONResponse(page), err
}
