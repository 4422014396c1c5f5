package ledger

import (
	"context"
	"slices"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger/base"
)

// planReversal undoes one entry: pairs it joined are cut again, pairs it cut are joined again. Later entries that
// would lose their meaning are in the way, and are listed.
//
// Which are these? Undoing a join must leave exactly the segments apart that the entry had joined; so every pair it
// joined must still be there, all inside one segment. Undoing a cut must join exactly the parts that the entry made,
// one by one: the ends of what it cut must still lie in that many segments, those of different parts in different
// ones. Otherwise a later split would be undone in passing, or a later merge be made a second way round.
func (v *Volume) planReversal(ctx context.Context, d Draft) (*plan, error) {
	e, err := v.Entry(ctx, d.Reversal.Position)
	if err != nil {
		return nil, err
	}
	later, err := queryEntries(ctx, v.pool, entryColumns+` where e.volume_id = $1 and reverses = $2`, v.info.VolumeID, e.Position)
	if err != nil {
		return nil, err
	}
	if len(later) > 0 {
		return nil, fault.Newf(fault.Conflict, "already-reversed", "entry %d was reversed by %s at position %d", e.Position, later[0].Person, later[0].Position).
			WithNext("to bring it back, reverse that reversal").WithData("position", itoa(later[0].Position))
	}
	p := &plan{draft: d, kind: KindReversal, reverse: e.Position}
	if e.Joined.Len() > 0 {
		err = v.planParting(ctx, e, p)
	} else {
		err = v.planRejoining(ctx, e, p)
	}
	return p, err
}

// planParting cuts again what an entry joined.
func (v *Volume) planParting(ctx context.Context, e Entry, p *plan) error {
	set, err := v.byOrdinal(e.Joined)
	if err != nil {
		return err
	}
	if err := v.fresh(ctx); err != nil {
		return err
	}
	whole, live := v.state.holding(set)
	v.mu.RUnlock()
	if !live || len(whole) != 1 {
		return v.inTheWay(ctx, e)
	}
	p.before, p.cut = whole, pairs{set, e.Joined}
	if err := v.expectNow(ctx, p); err != nil {
		return err
	}
	w, err := v.View(ctx, whole[0].ID)
	if err != nil {
		return err
	}
	pieces := divided(w, without(w, set), nil)
	if len(pieces) != len(e.Before) {
		return v.inTheWay(ctx, e)
	}
	for _, q := range pieces {
		p.parts = append(p.parts, q.part)
	}
	return nil
}

// without lists a view's contacts less those of a set.
func without(w *base.View, set edgeSet) []base.Contact {
	gone := map[bool]map[[2]uint32]bool{false: {}, true: {}} // by whether it is a link
	for _, c := range set.contacts {
		gone[false][c] = true
	}
	for _, l := range set.links {
		gone[true][l] = true
	}
	return slices.DeleteFunc(slices.Clone(w.Contacts), func(c base.Contact) bool {
		return gone[c.Link][[2]uint32{w.Ordinals[c.A], w.Ordinals[c.B]}]
	})
}

// planRejoining joins again what an entry cut.
func (v *Volume) planRejoining(ctx context.Context, e Entry, p *plan) error {
	set, err := v.byOrdinal(e.Cut)
	if err != nil {
		return err
	}
	var ends []ID
	for _, pair := range append(slices.Clone(e.Cut.Contacts), e.Cut.Links...) {
		ends = append(ends, pair[0], pair[1])
	}
	then, err := v.SegmentsOf(ctx, ends, AtPosition(e.Position))
	if err != nil {
		return err
	}
	ord, err := v.ordinals(ends)
	if err != nil {
		return err
	}
	if err := v.fresh(ctx); err != nil {
		return err
	}
	defer v.mu.RUnlock()
	nowOf, partOf := make(map[ID]ID), make(map[ID]ID) // part as it was made -> segment now, and back
	faithful := v.state.absent(set)
	for i, g := range ord {
		now := v.state.segmentOf(v.state.groupOf(g))
		if was, ok := nowOf[then[i]]; ok && was != now.ID {
			faithful = false
		}
		if was, ok := partOf[now.ID]; ok && was != then[i] {
			faithful = false
		}
		if _, ok := partOf[now.ID]; !ok {
			p.before = append(p.before, now)
		}
		nowOf[then[i]], partOf[now.ID] = now.ID, then[i]
	}
	if !faithful {
		return v.inTheWay(ctx, e)
	}
	p.joined = pairs{set, e.Cut}
	return v.state.expect(p.draft.Expected, p.before)
}

// holding lists the segments that hold the pairs of a set, and says whether every pair is live inside one.
func (s *state) holding(set edgeSet) (segs []Segment, live bool) {
	live = true
	note := func(pair [2]uint32, there bool) {
		a, b := s.groupOf(pair[0]), s.groupOf(pair[1])
		live = live && there && a == b
		seg := s.segmentOf(a)
		if !slices.ContainsFunc(segs, func(x Segment) bool { return x.ID == seg.ID }) {
			segs = append(segs, seg)
		}
	}
	for _, c := range set.contacts {
		_, cut := s.cuts[c]
		note(c, !cut)
	}
	for _, l := range set.links {
		note(l, s.links[l[0]][l[1]] > 0)
	}
	return segs, live
}

// absent says whether no pair of a set is accepted now.
func (s *state) absent(set edgeSet) bool {
	for _, c := range set.contacts {
		if _, cut := s.cuts[c]; !cut {
			return false
		}
	}
	for _, l := range set.links {
		if s.links[l[0]][l[1]] > 0 {
			return false
		}
	}
	return true
}

func (v *Volume) expectNow(ctx context.Context, p *plan) error {
	if err := v.fresh(ctx); err != nil {
		return err
	}
	defer v.mu.RUnlock()
	return v.state.expect(p.draft.Expected, p.before)
}

// inTheWay refuses a reversal and lists the later entries that came out of the one to be undone, newest first: the order
// in which they would have to be reversed.
func (v *Volume) inTheWay(ctx context.Context, e Entry) error {
	var later []Change
	seen := make(map[int64]bool)
	for _, id := range e.After {
		_, between, err := v.descend(ctx, id)
		if err != nil {
			return err
		}
		for _, c := range between {
			if !seen[c.Position] {
				seen[c.Position] = true
				later = append(later, c)
			}
		}
	}
	slices.SortFunc(later, func(a, b Change) int { return int(b.Position - a.Position) })
	return fault.Newf(fault.Conflict, "later-entries", "entry %d can't be undone alone: %d later entries built on it", e.Position, len(later)).
		WithNext("reverse the later entries that matter first, newest first").WithData("entries", later)
}
