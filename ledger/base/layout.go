package base

import (
	"cmp"
	"slices"
)

// layoutVersion is the version of the order of ordinals and of the block format. A base remembers the one it was
// made with.
const layoutVersion = 1

// treeEdge is an accepted contact on its way into the spanning forest.
type treeEdge struct {
	weakness uint8  // 255 - affinity code
	length2  uint64 // squared distance of the centres, nm²
	a, b     uint32 // ranks, a < b
}

// key puts the strongest first; of equally strong ones the shortest, where all beyond 26 cm are alike.
func (e treeEdge) key() (high, low uint64) {
	return uint64(e.weakness)<<56 | min(e.length2, 1<<56-1), pairKey(e.a, e.b)
}

// layout decides the ordinals. A rank is the place of a supervoxel among all by id: what the order is computed from,
// so that it depends on nothing but the rows.
//
// The spanning forest is a maximum one (Kruskal 1956). So when every contact across a cut is weaker than those that
// hold the smaller side together, the cut crosses the tree once, and the smaller side is one subtree: one range of
// ordinals.
type layout struct {
	sv      *supervoxels
	sets    []uint32 // disjoint sets of ranks
	tree    [][2]uint32
	assumed [][2]uint32 // those of the tree that no contact stands behind

	ordinal []uint32 // by rank
	rank    []uint32 // by ordinal
	numbers []uint32 // base segment number -> index into sv.segments
	lo      []uint32 // by number
}

func newLayout(sv *supervoxels) *layout {
	l := &layout{sv: sv, sets: make([]uint32, sv.len()), tree: make([][2]uint32, 0, sv.len())}
	for i := range l.sets {
		l.sets[i] = uint32(i)
	}
	return l
}

func (l *layout) find(a uint32) uint32 {
	for l.sets[a] != a {
		l.sets[a] = l.sets[l.sets[a]]
		a = l.sets[a]
	}
	return a
}

// join adds an edge to the forest unless it would close a ring. Edges come strongest first.
func (l *layout) join(a, b uint32) bool {
	x, y := l.find(a), l.find(b)
	if x == y {
		return false
	}
	l.sets[max(x, y)] = min(x, y)
	l.tree = append(l.tree, [2]uint32{a, b})
	return true
}

// arrange turns the forest into ordinals. Before it, base segments that the forest leaves in parts are connected.
func (l *layout) arrange() {
	start, members := l.membersOf()
	l.connectParts(start, members)
	arcStart, arcs := l.arcs()
	l.numbers = l.segmentOrder(start, members)
	l.ordinal = make([]uint32, l.sv.len())
	l.rank = make([]uint32, l.sv.len())
	l.lo = make([]uint32, len(l.numbers))
	w := &walk{l: l, start: arcStart, arcs: arcs, parent: make([]uint32, l.sv.len()), size: make([]uint32, l.sv.len())}
	next := uint32(0)
	for n, s := range l.numbers {
		l.lo[n] = next
		w.preorder(members[start[s]:start[s+1]], next)
		next += start[s+1] - start[s]
	}
	for r, g := range l.ordinal {
		l.rank[g] = uint32(r)
	}
}

// membersOf lists the ranks of each segment, ascending: those of s are members[start[s]:start[s+1]].
func (l *layout) membersOf() (start, members []uint32) {
	start = make([]uint32, len(l.sv.segments)+1)
	for _, s := range l.sv.segment {
		start[s+1]++
	}
	for s := range l.sv.segments {
		start[s+1] += start[s]
	}
	next := slices.Clone(start)
	members = make([]uint32, l.sv.len())
	for r, s := range l.sv.segment {
		members[next[s]] = uint32(r)
		next[s]++
	}
	return start, members
}

// arcs makes the forest a two-way adjacency.
func (l *layout) arcs() (start, arcs []uint32) {
	start = make([]uint32, l.sv.len()+1)
	for _, e := range l.tree {
		start[e[0]+1]++
		start[e[1]+1]++
	}
	for i := range l.sv.len() {
		start[i+1] += start[i]
	}
	next := slices.Clone(start)
	arcs = make([]uint32, 2*len(l.tree))
	for _, e := range l.tree {
		arcs[next[e[0]]] = e[1]
		next[e[0]]++
		arcs[next[e[1]]] = e[0]
		next[e[1]]++
	}
	return start, arcs
}

// segmentOrder puts base segments into the order in which they are numbered: along a Z curve through their roots
// (Morton 1966), so that neighbours in space mostly share blocks; ties by id.
func (l *layout) segmentOrder(start, members []uint32) []uint32 {
	low := emptyBox()
	for _, p := range l.sv.at {
		low.add(p)
	}
	code := make([]uint64, len(l.sv.segments))
	numbers := make([]uint32, len(l.sv.segments))
	for s := range numbers {
		numbers[s] = uint32(s)
		p := l.sv.at[l.root(members[start[s]:start[s+1]])]
		for i, v := range p {
			code[s] |= spread(uint64(int64(v)-int64(low.min[i]))>>11) << i
		}
	}
	slices.SortFunc(numbers, func(a, b uint32) int { return cmp.Or(cmp.Compare(code[a], code[b]), cmp.Compare(a, b)) })
	return numbers
}

// spread puts two zero bits between the low 21 bits of v.
func spread(v uint64) uint64 {
	v &= 1<<21 - 1
	v = (v | v<<32) & 0x1f00000000ffff
	v = (v | v<<16) & 0x1f0000ff0000ff
	v = (v | v<<8) & 0x100f00f00f00f00f
	v = (v | v<<4) & 0x10c30c30c30c30c3
	return (v | v<<2) & 0x1249249249249249
}

// root is the largest supervoxel, mostly in the cell body; the first of equals.
func (l *layout) root(members []uint32) uint32 {
	best := members[0]
	for _, r := range members[1:] {
		if l.sv.voxels[r] > l.sv.voxels[best] {
			best = r
		}
	}
	return best
}

// walk numbers trees; its arrays are by rank and serve all segments in turn.
type walk struct {
	l            *layout
	start, arcs  []uint32
	parent, size []uint32
	order        []uint32
}

// preorder numbers one segment's tree from an ordinal on: a supervoxel, then its subtrees from the smallest to the
// largest, so that the main branch comes last and jumps stay short. No recursion: trees can be a million deep.
func (w *walk) preorder(members []uint32, from uint32) {
	root := w.l.root(members)
	w.order = append(w.order[:0], root)
	w.parent[root] = root
	for i := 0; i < len(w.order); i++ {
		v := w.order[i]
		w.size[v] = 1
		for _, c := range w.arcs[w.start[v]:w.start[v+1]] {
			if c != w.parent[v] {
				w.parent[c] = v
				w.order = append(w.order, c)
			}
		}
	}
	for i := len(w.order) - 1; i > 0; i-- {
		v := w.order[i]
		w.size[w.parent[v]] += w.size[v]
	}
	w.l.ordinal[root] = from
	for _, v := range w.order {
		children := w.arcs[w.start[v]:w.start[v+1]]
		slices.SortFunc(children, func(a, b uint32) int { return cmp.Or(cmp.Compare(w.size[a], w.size[b]), cmp.Compare(a, b)) })
		next := w.l.ordinal[v] + 1
		for _, c := range children {
			if c != w.parent[v] {
				w.l.ordinal[c] = next
				next += w.size[c]
			}
		}
	}
}
