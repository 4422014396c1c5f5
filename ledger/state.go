package ledger

import (
	"cmp"
	"slices"
	"sort"
	"time"

	"fettle.example/fettle/ledger/base"
)

// state is who is where at one position. An edited base segment has runs that cover it end to end; an untouched
// one has none, and its supervoxels are in the group of the segment's own number. A group is an internal name
// that outlives segment ids: a merge moves the runs of the side with fewer, a split those of the smaller side, and
// the id of either is one field. So an edit costs by its smaller side.
//
// state changes only by advance and retreat, whether an entry was posted here or read from the database.
type state struct {
	base     *base.Base
	mintFrom ID
	position int64
	last     time.Time // when the last entry was posted; times never run backwards along positions
	minted   int64     // ids drawn so far
	groups   int64     // next group number

	runs    map[int][]run               // by number of the base segment, sorted by lo
	members map[int64]map[uint32]uint32 // runs of a group: lo -> hi; only groups that an edit touched
	current map[int64]Segment           // segment of a group that an edit touched
	byID    map[ID]int64                // group of a current segment that an edit made
	gone    map[ID]struct{}             // delivered segments that are retired
	links   map[uint32]map[uint32]int   // live links by ordinal, both ways, counted
	cuts    map[[2]uint32]struct{}      // accepted contacts that people cut, lower ordinal first
}

// run is a range of ordinals of one base segment in one group. from is the position of its piece row, 0 when no
// row says so (ordinals at home).
type run struct {
	lo, hi uint32
	group  int64
	from   int64
}

// piece is a row of table piece, open (to = 0) or closed.
type piece struct {
	lo, hi   uint32
	group    int64
	from, to int64
}

// change is what one entry does to the tables and to the state. It holds enough to be undone.
type change struct {
	entry   Entry
	closed  []piece   // rows that end at the entry's position
	opened  []piece   // rows that begin at it
	retired []Segment // segments that end, Retired set
	born    []Segment // segments that begin, with their groups
	joined  edgeSet   // pairs that become accepted
	cut     edgeSet   // pairs that cease to be
	groups  int64     // group numbers drawn
	minted  int64     // ids drawn
}

// edgeSet is Edges by ordinals, lower first.
type edgeSet struct {
	contacts, links [][2]uint32
}

func newState(b *base.Base) *state {
	return &state{
		base:     b,
		mintFrom: b.Info().MintFrom,
		groups:   int64(b.SegmentCount()),
		runs:     make(map[int][]run),
		members:  make(map[int64]map[uint32]uint32),
		current:  make(map[int64]Segment),
		byID:     make(map[ID]int64),
		gone:     make(map[ID]struct{}),
		links:    make(map[uint32]map[uint32]int),
		cuts:     make(map[[2]uint32]struct{}),
	}
}

// groupOf is the group of a supervoxel. O(log runs of its base segment).
func (s *state) groupOf(g uint32) int64 {
	n := s.base.SegmentNumber(g)
	runs, ok := s.runs[n]
	if !ok {
		return int64(n)
	}
	return runs[find(runs, g)].group
}

func find(runs []run, g uint32) int {
	return sort.Search(len(runs), func(i int) bool { return runs[i].hi > g })
}

// segmentOf is the current segment of a group.
func (s *state) segmentOf(group int64) Segment {
	if seg, ok := s.current[group]; ok {
		return seg
	}
	b := s.base.Segment(int(group))
	return Segment{ID: b.ID, Totals: b.Totals, group: group}
}

// idOf is the current segment's id of a group.
func (s *state) idOf(group int64) ID {
	if seg, ok := s.current[group]; ok {
		return seg.ID
	}
	return s.base.SegmentID(int(group))
}

// lookup finds a current segment by id.
func (s *state) lookup(id ID) (Segment, bool) {
	if g, ok := s.byID[id]; ok {
		return s.current[g], true
	}
	n, ok := s.base.FindSegment(id)
	if !ok {
		return Segment{}, false
	}
	if _, gone := s.gone[id]; gone {
		return Segment{}, false
	}
	return s.segmentOf(int64(n)), true
}

// ranges lists the ordinals of a group, sorted, adjacent ones joined.
func (s *state) ranges(group int64) []base.Range {
	m, ok := s.members[group]
	if !ok {
		b := s.base.Segment(int(group))
		return []base.Range{{Lo: b.Lo, Hi: b.Hi}}
	}
	out := make([]base.Range, 0, len(m))
	for lo, hi := range m {
		out = append(out, base.Range{Lo: lo, Hi: hi})
	}
	return tidy(out)
}

// pieces counts the runs of a group: what moving it would cost.
func (s *state) pieces(group int64) int {
	if m, ok := s.members[group]; ok {
		return len(m)
	}
	return 1
}

// tidy sorts ranges and joins those that touch.
func tidy(in []base.Range) []base.Range {
	slices.SortFunc(in, func(a, b base.Range) int { return cmp.Compare(a.Lo, b.Lo) })
	out := in[:0]
	for _, r := range in {
		if n := len(out); n > 0 && out[n-1].Hi == r.Lo {
			out[n-1].Hi = r.Hi
			continue
		}
		out = append(out, r)
	}
	return out
}

// runsOf is the runs of a base segment, made explicit.
func (s *state) runsOf(n int) []run {
	if r, ok := s.runs[n]; ok {
		return r
	}
	b := s.base.Segment(n)
	return []run{{lo: b.Lo, hi: b.Hi, group: int64(n)}}
}

// move sends the ordinals [lo,hi) to a group.
type move struct {
	lo, hi uint32
	group  int64
}

// rearrange says how the rows change when moves take effect at a position: rows that end, rows that begin. A run
// that is only partly moved is closed and its remainder opened again; a run that comes home to the group of its
// own base segment needs no row. It sorts and uses up moves, and leaves the state alone.
func (s *state) rearrange(moves []move, position int64) (closed, opened []piece) {
	slices.SortFunc(moves, func(a, b move) int { return cmp.Compare(a.lo, b.lo) })
	open := func(lo, hi uint32, group int64) {
		if lo < hi {
			opened = append(opened, piece{lo: lo, hi: hi, group: group, from: position})
		}
	}
	for i := 0; i < len(moves); {
		home := s.base.SegmentNumber(moves[i].lo)
		runs := s.runsOf(home)
		at := runs[find(runs, moves[i].lo)]
		if at.from > 0 {
			closed = append(closed, piece{at.lo, at.hi, at.group, at.from, position})
		}
		done := at.lo
		for i < len(moves) && moves[i].lo < at.hi {
			m := &moves[i]
			hi := min(m.hi, at.hi)
			if at.from > 0 {
				open(done, m.lo, at.group)
			}
			if m.group != int64(home) {
				open(m.lo, hi, m.group)
			}
			done = hi
			if m.hi > at.hi { // the rest lies in the next run
				m.lo = at.hi
				break
			}
			i++
		}
		if at.from > 0 {
			open(done, at.hi, at.group)
		}
	}
	return closed, opened
}

// assign gives [lo,hi), which lies in one base segment, to a group. Neighbours at home become one run again; runs
// with a row of their own stay apart, as their rows do.
func (s *state) assign(lo, hi uint32, group, from int64) {
	n := s.base.SegmentNumber(lo)
	old := s.runsOf(n)
	i := find(old, lo)
	j := i
	for j < len(old) && old[j].lo < hi {
		delete(s.membersOf(old[j].group), old[j].lo)
		j++
	}
	first, last := old[i], old[j-1]
	middle := make([]run, 0, 3)
	if first.lo < lo {
		middle = append(middle, run{first.lo, lo, first.group, first.from})
	}
	middle = append(middle, run{lo, hi, group, from})
	if hi < last.hi {
		middle = append(middle, run{hi, last.hi, last.group, last.from})
	}
	next := make([]run, 0, len(old)+2)
	next = append(next, old[:i]...)
	for _, r := range append(middle, old[j:]...) {
		if k := len(next); k > 0 && r.from == 0 && next[k-1].from == 0 {
			delete(s.membersOf(r.group), r.lo)
			r.lo = next[k-1].lo
			next = next[:k-1]
		}
		s.membersOf(r.group)[r.lo] = r.hi
		next = append(next, r)
	}
	s.runs[n] = next
}

// membersOf makes a group's members explicit. A base segment that is met for the first time starts whole.
func (s *state) membersOf(group int64) map[uint32]uint32 {
	m, ok := s.members[group]
	if !ok {
		m = make(map[uint32]uint32)
		if home := int(group); group < int64(s.base.SegmentCount()) {
			if _, edited := s.runs[home]; !edited {
				b := s.base.Segment(home)
				m[b.Lo] = b.Hi
				s.runs[home] = []run{{lo: b.Lo, hi: b.Hi, group: group}}
			}
		}
		s.members[group] = m
	}
	return m
}

// advance applies a change.
func (s *state) advance(c *change) {
	for _, p := range c.closed {
		s.assign(p.lo, p.hi, int64(s.base.SegmentNumber(p.lo)), 0)
	}
	for _, p := range c.opened {
		s.assign(p.lo, p.hi, p.group, p.from)
	}
	for _, seg := range c.retired {
		s.forget(seg)
	}
	for _, seg := range c.born {
		s.remember(seg)
	}
	s.join(c.joined)
	s.sever(c.cut)
	s.position = c.entry.Position
	s.groups += c.groups
	s.minted += c.minted
	if c.entry.At.After(s.last) {
		s.last = c.entry.At
	}
}

// retreat undoes the change that was applied last.
func (s *state) retreat(c *change) {
	for _, p := range c.opened {
		s.assign(p.lo, p.hi, int64(s.base.SegmentNumber(p.lo)), 0)
	}
	for _, p := range c.closed {
		s.assign(p.lo, p.hi, p.group, p.from)
	}
	for _, seg := range c.born {
		s.forget(seg)
	}
	for _, seg := range c.retired {
		s.remember(seg)
	}
	s.join(c.cut)
	s.sever(c.joined)
	s.position = c.entry.Position - 1
	s.groups -= c.groups
	s.minted -= c.minted
}

func (s *state) forget(seg Segment) {
	delete(s.byID, seg.ID)
	if s.current[seg.group].ID == seg.ID {
		delete(s.current, seg.group)
	}
	if seg.Born == 0 {
		s.gone[seg.ID] = struct{}{}
	}
}

func (s *state) remember(seg Segment) {
	seg.Retired = 0
	s.current[seg.group] = seg
	if seg.Born == 0 {
		delete(s.gone, seg.ID)
		delete(s.current, seg.group) // a delivered segment is known by its base
		return
	}
	s.byID[seg.ID] = seg.group
}

func (s *state) join(e edgeSet) {
	for _, c := range e.contacts {
		delete(s.cuts, c)
	}
	for _, l := range e.links {
		s.link(l[0], l[1], 1)
		s.link(l[1], l[0], 1)
	}
}

func (s *state) sever(e edgeSet) {
	for _, c := range e.contacts {
		s.cuts[c] = struct{}{}
	}
	for _, l := range e.links {
		s.link(l[0], l[1], -1)
		s.link(l[1], l[0], -1)
	}
}

func (s *state) link(a, b uint32, by int) {
	m := s.links[a]
	if m == nil {
		m = make(map[uint32]int)
		s.links[a] = m
	}
	if m[b] += by; m[b] <= 0 {
		delete(m, b)
		if len(m) == 0 {
			delete(s.links, a)
		}
	}
}
