package ledger

import (
	"context"
	"slices"
	"strings"
	"unicode/utf8"

	"github.com/google/uuid"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger/base"
)

// Draft is what a person asks for. Exactly one of Merge, Split and Reversal is set.
type Draft struct {
	ID       uuid.UUID // version 7; the same id posted again answers with the entry that was stored
	Person   string
	Agent    string
	Task     *uuid.UUID
	Reason   string
	Expected []ID // the segments the person saw: all that the entry changes, no others
	Merge    *Merge
	Split    *Split
	Reversal *Reversal
}

// Merge joins the segments of two supervoxels by a link between them.
type Merge struct{ A, B ID }

// Split takes groups of supervoxels of one segment apart by the minimum cut between them.
type Split struct{ Groups [][]ID }

// Reversal undoes the entry at a position.
type Reversal struct{ Position int64 }

// plan is the exact change that a draft makes. It names the segments it starts from; because a segment id names
// exact content, a plan made before the poster's turn still holds if those ids are current when the turn comes.
type plan struct {
	draft   Draft
	kind    string
	before  []Segment
	parts   []part // of a division: what each new segment holds; empty when segments are joined
	joined  pairs  // pairs that become accepted
	cut     pairs  // pairs that cease to be
	cost    int64  // minimum cut in 1e-6 of log-odds
	reverse int64  // position of the entry undone
}

// pairs are the same pairs by ordinal, as the state holds them, and by id, as the entry does.
type pairs struct {
	edgeSet
	ids Edges
}

// part is one connected piece of a divided segment.
type part struct {
	ranges []base.Range
	totals Totals
}

// plan works a draft out against the present state. It takes the read lock only to look, so that a large split is
// computed beside other work.
func (v *Volume) plan(ctx context.Context, d Draft) (*plan, error) {
	if err := d.check(); err != nil {
		return nil, err
	}
	switch {
	case d.Merge != nil:
		return v.planMerge(ctx, d)
	case d.Split != nil:
		p, _, err := v.planSplit(ctx, d)
		return p, err
	default:
		return v.planReversal(ctx, d)
	}
}

// check refuses what is wrong whatever the state.
func (d Draft) check() error {
	n := 0
	for _, set := range []bool{d.Merge != nil, d.Split != nil, d.Reversal != nil} {
		if set {
			n++
		}
	}
	switch {
	case n != 1:
		return fault.New(fault.Invalid, "draft-kind", "an entry is a merge, a split or a reversal: exactly one of them")
	case d.Person == "":
		return fault.New(fault.Invalid, "draft-person", "an entry needs the person who posts it")
	case d.ID == uuid.Nil:
		return fault.New(fault.Invalid, "draft-id", "an entry needs an id of its own, so that a repeat is recognised")
	case utf8.RuneCountInString(d.Reason) > 2000:
		return fault.New(fault.Invalid, "draft-reason", "the reason is longer than 2000 characters").WithField("reason")
	case !utf8.ValidString(d.Reason) || strings.ContainsRune(d.Reason, 0):
		return fault.New(fault.Invalid, "draft-reason", "the reason is not plain text in UTF-8").WithField("reason")
	case d.Split != nil && len(d.Split.Groups) != 2:
		return fault.Newf(fault.Invalid, "split-groups", "a split takes two groups of supervoxels, not %d", len(d.Split.Groups)).
			WithField("groups")
	}
	return nil
}

// ordinals finds supervoxels by id; unknown ones are fault.NotFound.
func (v *Volume) ordinals(ids []ID) ([]uint32, error) {
	out := make([]uint32, len(ids))
	for i, id := range ids {
		g, ok := v.base.Ordinal(id)
		if !ok {
			return nil, unknownSupervoxel(v.info.Name, id)
		}
		out[i] = g
	}
	return out, nil
}

func unknownSupervoxel(volume string, id ID) error {
	return fault.Newf(fault.NotFound, "supervoxel-unknown", "volume %s has no supervoxel %s", volume, id).
		WithNext("check the id against the delivery").WithData("supervoxel", id)
}

func (v *Volume) planMerge(ctx context.Context, d Draft) (*plan, error) {
	ord, err := v.ordinals([]ID{d.Merge.A, d.Merge.B})
	if err != nil {
		return nil, err
	}
	if err := v.fresh(ctx); err != nil {
		return nil, err
	}
	defer v.mu.RUnlock()
	return v.state.planMerge(d, ord[0], ord[1])
}

// planMerge joins two segments that differ. O(log n).
func (s *state) planMerge(d Draft, a, b uint32) (*plan, error) {
	sa, sb := s.segmentOf(s.groupOf(a)), s.segmentOf(s.groupOf(b))
	p := &plan{draft: d, kind: KindMerge, before: []Segment{sa, sb}}
	if sa.ID == sb.ID {
		p.before = p.before[:1]
	}
	if err := s.expect(d.Expected, p.before); err != nil {
		return nil, err
	}
	if sa.ID == sb.ID {
		return nil, fault.Newf(fault.Conflict, "already-joined",
			"supervoxels %s and %s are in one segment already, %s", d.Merge.A, d.Merge.B, sa.ID).
			WithNext("nothing is left to do here").WithData("segment", sa.ID)
	}
	p.joined.links = [][2]uint32{ordered(a, b)}
	p.joined.ids.Links = [][2]ID{{d.Merge.A, d.Merge.B}}
	return p, nil
}

// expect holds the ids a person saw against the segments that an entry would change.
func (s *state) expect(saw []ID, now []Segment) error {
	ids := segmentIDs(now)
	if len(saw) == 0 {
		return fault.New(fault.Invalid, "expected-missing", "name the segments you saw, so that nothing is changed that you have not seen").
			WithField("expected").WithData("current", ids)
	}
	for _, id := range saw {
		if _, ok := s.lookup(id); !ok {
			return &staleError{saw: saw}
		}
	}
	sorted := func(in []ID) []ID {
		out := slices.Clone(in)
		slices.Sort(out)
		return slices.Compact(out)
	}
	if !slices.Equal(sorted(saw), sorted(ids)) {
		return fault.Newf(fault.Conflict, "expected-other",
			"this would change %s, and you named %s", list(ids), list(saw)).
			WithNext("look at the segments again, then name exactly those").WithField("expected").WithData("current", ids)
	}
	return nil
}

func segmentIDs(segs []Segment) []ID {
	out := make([]ID, len(segs))
	for i, s := range segs {
		out[i] = s.ID
	}
	return out
}

func ordered(a, b uint32) [2]uint32 {
	if a > b {
		a, b = b, a
	}
	return [2]uint32{a, b}
}

// settle turns a plan into the change of the next position. The caller holds the write lock; expected ids are held
// against the state once more, because others may have posted since the plan was made.
func (s *state) settle(p *plan) (*change, error) {
	for i, was := range p.before {
		now, ok := s.lookup(was.ID)
		if !ok {
			return nil, &staleError{saw: segmentIDs(p.before)}
		}
		p.before[i] = now
	}
	c := &change{entry: Entry{
		Position: s.position + 1, ID: p.draft.ID, Kind: p.kind, Person: p.draft.Person, Agent: p.draft.Agent,
		Task: p.draft.Task, Reason: p.draft.Reason, Reverses: p.reverse, Cost: p.cost, Before: segmentIDs(p.before),
		Joined: p.joined.ids, Cut: p.cut.ids,
	}, joined: p.joined.edgeSet, cut: p.cut.edgeSet}
	if p.draft.Split != nil {
		c.entry.Seeds = p.draft.Split.Groups
	}
	for _, seg := range p.before {
		seg.Retired = c.entry.Position
		c.retired = append(c.retired, seg)
	}
	if len(p.parts) > 0 {
		s.divide(p, c)
	} else {
		s.unite(p, c)
	}
	for _, seg := range c.born {
		c.entry.After = append(c.entry.After, seg.ID)
	}
	return c, nil
}

// unite moves the runs of every segment but the one with most of them into that one's group.
func (s *state) unite(p *plan, c *change) {
	keeper := p.before[0]
	for _, seg := range p.before[1:] {
		if s.pieces(seg.group) > s.pieces(keeper.group) {
			keeper = seg
		}
	}
	total := keeper.Totals
	var moves []move
	for _, seg := range p.before {
		if seg.group == keeper.group {
			continue
		}
		for _, r := range s.ranges(seg.group) {
			moves = append(moves, move{r.Lo, r.Hi, keeper.group})
		}
		total = plus(total, seg.Totals)
	}
	c.closed, c.opened = s.rearrange(moves, c.entry.Position)
	s.bear(c, keeper.group, total)
}

// divide leaves the largest part where it is and moves the others to new groups.
func (s *state) divide(p *plan, c *change) {
	keeper := 0
	for i, q := range p.parts {
		if q.totals.Supervoxels > p.parts[keeper].totals.Supervoxels {
			keeper = i
		}
	}
	var moves []move
	for i, q := range p.parts {
		group := p.before[0].group
		if i != keeper {
			group = s.groups + c.groups
			c.groups++
			for _, r := range q.ranges {
				moves = append(moves, move{r.Lo, r.Hi, group})
			}
		}
		s.bear(c, group, q.totals)
	}
	c.closed, c.opened = s.rearrange(moves, c.entry.Position)
}

// bear mints the id of a new segment.
func (s *state) bear(c *change, group int64, t Totals) {
	c.minted++
	id := s.mintFrom + ID(s.minted+c.minted-1)
	c.born = append(c.born, Segment{ID: id, Totals: t, Born: c.entry.Position, group: group})
}
