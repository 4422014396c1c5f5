package ledger

import (
	"cmp"
	"context"
	"slices"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/ledger/cut"
)

// planSplit finds the minimum cut between two groups of supervoxels of one segment. It loads the segment whole:
// time and memory are proportional to it. It also returns the preview, made of the same numbers.
func (v *Volume) planSplit(ctx context.Context, d Draft) (*plan, *SplitPreview, error) {
	seg, groups, err := v.splitSegment(ctx, d)
	if err != nil {
		return nil, nil, err
	}
	w, err := v.View(ctx, seg.ID)
	if err != nil {
		return nil, nil, err
	}
	local := make([][]int32, len(groups))
	for i, group := range groups {
		for _, g := range group {
			k, _ := slices.BinarySearch(w.Ordinals, g)
			local[i] = append(local[i], int32(k))
		}
	}
	edges := Edgelist(w)
	res, err := cut.Min(w.Len(), edges, local[0], local[1])
	if err != nil {
		return nil, nil, err
	}
	p := &plan{draft: d, kind: KindSplit, before: []Segment{seg}, cost: res.Flow}
	kept := make([]base.Contact, 0, len(w.Contacts)-len(res.Cut))
	for i, c := range w.Contacts {
		if _, is := slices.BinarySearch(res.Cut, i); is {
			p.cut.add(w, c)
		} else {
			kept = append(kept, c)
		}
	}
	if len(res.Cut) == 0 {
		return nil, nil, fault.New(fault.Conflict, "already-apart", "the two groups already hang together by nothing")
	}
	pieces := divided(w, kept, local)
	for _, q := range pieces {
		p.parts = append(p.parts, q.part)
	}
	return p, newSplitPreview(w, p, res, pieces), nil
}

// splitSegment checks that every seed is in one segment, the one that the person saw.
func (v *Volume) splitSegment(ctx context.Context, d Draft) (Segment, [][]uint32, error) {
	groups := make([][]uint32, len(d.Split.Groups))
	for i, ids := range d.Split.Groups {
		if len(ids) == 0 {
			return Segment{}, nil, fault.Newf(fault.Invalid, "split-group-empty", "group %d names no supervoxel", i+1).WithField("groups")
		}
		var err error
		if groups[i], err = v.ordinals(ids); err != nil {
			return Segment{}, nil, err
		}
		for _, id := range ids {
			if i > 0 && slices.Contains(d.Split.Groups[0], id) {
				return Segment{}, nil, fault.Newf(fault.Invalid, "split-seed-both", "supervoxel %s is in both groups", id).
					WithNext("take it out of one group: a supervoxel is never divided").WithField("groups")
			}
		}
	}
	if err := v.fresh(ctx); err != nil {
		return Segment{}, nil, err
	}
	defer v.mu.RUnlock()
	var before []Segment
	for _, group := range groups {
		for _, g := range group {
			seg := v.state.segmentOf(v.state.groupOf(g))
			if !slices.ContainsFunc(before, func(s Segment) bool { return s.ID == seg.ID }) {
				before = append(before, seg)
			}
		}
	}
	if len(before) > 1 {
		return Segment{}, nil, fault.Newf(fault.Conflict, "split-segments", "the groups lie in %d segments: %s", len(before), list(segmentIDs(before))).
			WithNext("name supervoxels of one segment").WithData("current", segmentIDs(before))
	}
	return before[0], groups, v.state.expect(d.Expected, before)
}

// Edgelist gives a view's contacts their capacities: the log-odds of the affinity; one unit for an assumed link; the
// largest for a person's link.
func Edgelist(w *base.View) []cut.Edge {
	edges := make([]cut.Edge, len(w.Contacts))
	for i, c := range w.Contacts {
		edges[i] = cut.Edge{A: c.A, B: c.B, Capacity: capacity(c)}
	}
	return edges
}

func capacity(c base.Contact) int64 {
	switch {
	case c.Link:
		return cut.LinkCapacity
	case c.Assumed:
		return cut.AssumedCapacity
	}
	return cut.Capacity(c.Affinity)
}

// add notes a contact of a view as a pair.
func (p *pairs) add(w *base.View, c base.Contact) {
	ord := [2]uint32{w.Ordinals[c.A], w.Ordinals[c.B]}
	ids := [2]ID{w.IDs[c.A], w.IDs[c.B]}
	if c.Link {
		p.links, p.ids.Links = append(p.links, ord), append(p.ids.Links, ids)
		return
	}
	p.contacts, p.ids.Contacts = append(p.contacts, ord), append(p.ids.Contacts, ids)
}

// side is a connected piece of a divided view.
type side struct {
	part
	group   int     // the first group it holds a seed of, -1 if none
	members []int32 // local indices, ascending
	first   ID      // its smallest supervoxel id
	cable   float64 // nm
}

// divided finds the connected pieces of a view over the contacts that are kept, first those that hold seeds of the first
// group, then the second's, then the unseeded; each by smallest supervoxel id, so that the order depends on nothing else.
func divided(w *base.View, kept []base.Contact, groups [][]int32) []side {
	edges := make([]cut.Edge, len(kept))
	for i, c := range kept {
		edges[i] = cut.Edge{A: c.A, B: c.B, Capacity: cut.MinCapacity}
	}
	label := cut.Components(w.Len(), edges)
	at := make(map[int32]int)
	var out []side
	for i, l := range label {
		k, ok := at[l]
		if !ok {
			k = len(out)
			at[l] = k
			out = append(out, side{group: -1, first: w.IDs[i]})
		}
		out[k].members = append(out[k].members, int32(i))
		out[k].first = min(out[k].first, w.IDs[i])
	}
	for g := len(groups) - 1; g >= 0; g-- {
		for _, seed := range groups[g] {
			out[at[label[seed]]].group = g
		}
	}
	for k := range out {
		q := &out[k]
		q.ranges = rangesOf(w, q.members)
		root := label[q.members[0]]
		q.totals = sum(w, func(i int32) bool { return label[i] == root })
	}
	spanningLengths(w, kept, label, func(l int32, nm float64) { out[at[l]].cable += nm })
	slices.SortFunc(out, func(a, b side) int {
		return cmp.Or(cmp.Compare(uint(a.group), uint(b.group)), cmp.Compare(a.first, b.first))
	})
	return out
}

// rangesOf gathers ascending local indices into ordinal ranges.
func rangesOf(w *base.View, members []int32) []base.Range {
	var out []base.Range
	for _, i := range members {
		g := w.Ordinals[i]
		if n := len(out); n > 0 && out[n-1].Hi == g {
			out[n-1].Hi = g + 1
			continue
		}
		out = append(out, base.Range{Lo: g, Hi: g + 1})
	}
	return out
}

// spanningLengths adds up, for each piece, the shortest contacts that hold it together (a minimum spanning tree, Kruskal
// 1956): a measure of its cable in nm that needs no skeleton and adds up over pieces.
func spanningLengths(w *base.View, kept []base.Contact, label []int32, add func(label int32, nm float64)) {
	lengths := make([]float64, len(kept))
	order := make([]int, len(kept))
	for i, c := range kept {
		lengths[i], order[i] = w.Points[c.A].Distance(w.Points[c.B]), i
	}
	slices.SortFunc(order, func(i, j int) int { return cmp.Or(cmp.Compare(lengths[i], lengths[j]), cmp.Compare(i, j)) })
	sets := cut.NewSets(w.Len())
	for _, i := range order {
		if sets.Union(kept[i].A, kept[i].B) {
			add(label[kept[i].A], lengths[i])
		}
	}
}
