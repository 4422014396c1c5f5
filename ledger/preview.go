package ledger

import (
	"context"
	"fmt"

	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/ledger/cut"
)

// SplitPreview says what a split would do. Nothing is posted.
type SplitPreview struct {
	Segment   Segment
	Sides     []Side
	Cut       Edges   // what would be cut; links among it are people's own
	Cost      float64 // the cut's cost in log-odds (natural logarithm); equals the maximum flow
	Ambiguous int     // supervoxels that could go either way at the same cost; they stay with the larger side
	Warnings  []string
}

// Side is what one new segment would hold.
type Side struct {
	Group  int // 1 or 2: whose seeds it holds; 0: it would fall off unseeded
	Totals Totals
	Cable  float64 // nm, the shortest contacts that hold it together
	First  ID      // its smallest supervoxel id, to know it by
}

// fewBeyondSeeds is when a side is called little more than its seeds: a lone seed in dense tissue comes back alone.
const fewBeyondSeeds = 2

func newSplitPreview(w *base.View, p *plan, res cut.Result, pieces []side) *SplitPreview {
	out := &SplitPreview{Segment: p.before[0], Cut: p.cut.ids, Cost: float64(res.Flow) * cut.Unit, Ambiguous: res.Ambiguous}
	for _, q := range pieces {
		out.Sides = append(out.Sides, Side{Group: q.group + 1, Totals: q.totals, Cable: q.cable, First: q.first})
		switch {
		case q.group < 0:
			out.Warnings = append(out.Warnings, fmt.Sprintf("a part of %d supervoxels that holds no seed falls off", len(q.members)))
		case len(q.members) <= fewBeyondSeeds*len(p.draft.Split.Groups[q.group]) && len(q.members) < w.Len()/2:
			out.Warnings = append(out.Warnings, fmt.Sprintf(
				"side %d is little more than its seeds (%d supervoxels): name more seeds on that side", q.group+1, len(q.members)))
		}
	}
	if len(pieces) > 2 {
		out.Warnings = append(out.Warnings, fmt.Sprintf("the split makes %d segments, because seeds of one group are held together only through the other", len(pieces)))
	}
	if n := len(p.cut.ids.Links); n > 0 {
		out.Warnings = append(out.Warnings, fmt.Sprintf("%d of what is cut are links that people made", n))
	}
	if res.Ambiguous > 0 {
		out.Warnings = append(out.Warnings, fmt.Sprintf("%d supervoxels could go either way at the same cost; they stay with the larger side", res.Ambiguous))
	}
	return out
}

// PreviewSplit works a split out and posts nothing.
func (v *Volume) PreviewSplit(ctx context.Context, d Draft) (*SplitPreview, error) {
	if err := d.check(); err != nil {
		return nil, err
	}
	_, preview, err := v.planSplit(ctx, d)
	return preview, v.explain(ctx, err)
}

// MergePreview says what a merge would do. Nothing is posted.
type MergePreview struct {
	Segments []Segment // the two it would join
	Totals   Totals    // what the new one would hold
	Distance float64   // nm between the centres of the two supervoxels
	Affinity *float64  // the model's belief, if the two touch
}

// PreviewMerge works a merge out and posts nothing.
func (v *Volume) PreviewMerge(ctx context.Context, d Draft) (*MergePreview, error) {
	if err := d.check(); err != nil {
		return nil, err
	}
	p, err := v.planMerge(ctx, d)
	if err != nil {
		return nil, v.explain(ctx, err)
	}
	out := &MergePreview{Segments: p.before, Totals: plus(p.before[0].Totals, p.before[1].Totals)}
	link := p.joined.links[0]
	a, b := link[0], link[1]
	w, err := v.base.View(ctx, v.pool, []base.Range{{Lo: a, Hi: a + 1}, {Lo: b, Hi: b + 1}})
	if err != nil {
		return nil, err
	}
	out.Distance = w.Points[0].Distance(w.Points[1])
	alone, err := v.base.View(ctx, v.pool, []base.Range{{Lo: a, Hi: a + 1}})
	if err != nil {
		return nil, err
	}
	for _, o := range alone.Outside {
		if o.Other == b {
			out.Affinity = &o.Affinity
		}
	}
	return out, nil
}
