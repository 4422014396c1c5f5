package triage

import (
	"context"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/stats"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
)

// judge is one look at a volume: what its segments are like, and how to load one.
type judge struct {
	volume   *ledger.Volume
	position int64
	segments []ledger.Segment
	byID     map[ledger.ID]ledger.Segment
	sizes    stats.Robust
	sizesOK  bool
}

// sizedLeast is how many supervoxels a segment must have for its size to count in the distribution: debris would drown it.
const sizedLeast = 10

func newJudge(ctx context.Context, v *ledger.Volume) (*judge, error) {
	j := &judge{volume: v, byID: make(map[ledger.ID]ledger.Segment)}
	var sizes []float64
	var err error
	j.position, err = v.CurrentSegments(ctx, func(s ledger.Segment) error {
		j.segments = append(j.segments, s)
		j.byID[s.ID] = s
		if s.Supervoxels >= sizedLeast {
			sizes = append(sizes, float64(s.Voxels))
		}
		return nil
	})
	j.sizes, _, j.sizesOK = stats.NewLogRobust(sizes)
	return j, err
}

// segment tells what a segment holds. One that an entry has made since the look began is asked for: the contacts to it are judged
// from the smaller side, which that entry may not have changed.
func (j *judge) segment(ctx context.Context, id ledger.ID) (ledger.Segment, error) {
	if s, ok := j.byID[id]; ok {
		return s, nil
	}
	return j.volume.Segment(ctx, id)
}

// look judges one segment. A segment that has changed meanwhile has no findings; the entry that changed it will be followed.
func (j *judge) look(ctx context.Context, id ledger.ID) ([]Finding, error) {
	w, err := j.volume.View(ctx, id)
	if fault.KindOf(err) == fault.Retired {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	c := NewCase(w, j.sizes, j.sizesOK)
	c.Other = func(id ledger.ID) (ledger.Segment, bool) {
		s, err := j.segment(ctx, id)
		return s, err == nil
	}
	c.Place = func(g uint32) (base.Point, bool) {
		one, err := j.volume.Base().View(ctx, j.volume.Pool(), []base.Range{{Lo: g, Hi: g + 1}})
		if err != nil || one.Len() != 1 {
			return base.Point{}, false
		}
		return one.Points[0], true
	}
	return Judge(c), nil
}
