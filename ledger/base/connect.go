package base

import (
	"cmp"
	"slices"
)

// connectParts gives every base segment that its accepted contacts leave in parts the missing links, the shortest
// that do: a minimum spanning tree of the parts (Borůvka 1926), with nearest pieces found in a k-d tree (Bentley
// 1975) whose nodes know when they hold one part alone. O(n log² n) as a rule, for a segment without any contact too.
func (l *layout) connectParts(start, members []uint32) {
	parts := make([]uint32, len(l.sv.segments))
	for r := range l.sets {
		if l.find(uint32(r)) == uint32(r) {
			parts[l.sv.segment[r]]++
		}
	}
	for s, n := range parts {
		if n < 2 {
			continue
		}
		t := newPartTree(l, members[start[s]:start[s+1]])
		for n > 1 {
			n -= t.linkParts()
		}
	}
}

// link is a candidate: of two, the shorter is better, then the one with the smaller ranks.
type link struct {
	length2 uint64
	a, b    uint32
}

func (x link) better(y link) bool {
	return cmp.Or(cmp.Compare(x.length2, y.length2), cmp.Compare(x.a, y.a), cmp.Compare(x.b, y.b)) < 0
}

// partTree is a k-d tree of the supervoxels of one segment.
type partTree struct {
	l      *layout
	ranks  []uint32
	nodes  []partNode
	chosen map[uint32]link // best link of each part
}

// partNode covers ranks[lo:hi]; left is 0 in a leaf, else the children are left and left+1.
type partNode struct {
	box    box
	lo, hi int
	left   int
	part   uint32
	mixed  bool // holds more than one part
}

// partLeaf is how many supervoxels a leaf may hold.
const partLeaf = 16

func newPartTree(l *layout, members []uint32) *partTree {
	t := &partTree{l: l, ranks: slices.Clone(members), nodes: []partNode{{hi: len(members)}}}
	for i := 0; i < len(t.nodes); i++ {
		n := t.nodes[i]
		n.box = emptyBox()
		for _, r := range t.ranks[n.lo:n.hi] {
			n.box.add(l.sv.at[r])
		}
		if n.hi-n.lo > partLeaf {
			axis := n.box.longest()
			slices.SortFunc(t.ranks[n.lo:n.hi], func(a, b uint32) int {
				return cmp.Or(cmp.Compare(l.sv.at[a][axis], l.sv.at[b][axis]), cmp.Compare(a, b))
			})
			n.left = len(t.nodes)
			half := (n.lo + n.hi) / 2
			t.nodes = append(t.nodes, partNode{lo: n.lo, hi: half}, partNode{lo: half, hi: n.hi})
		}
		t.nodes[i] = n
	}
	return t
}

func (b *box) longest() int {
	axis := 0
	for i := range b.min {
		if int64(b.max[i])-int64(b.min[i]) > int64(b.max[axis])-int64(b.min[axis]) {
			axis = i
		}
	}
	return axis
}

// linkParts joins every part but the largest to the part nearest to it, and tells how many links that took.
func (t *partTree) linkParts() (made uint32) {
	t.mark()
	largest := t.largest()
	t.chosen = make(map[uint32]link)
	for _, a := range t.ranks {
		if part := t.l.find(a); part != largest {
			t.search(0, a, part)
		}
	}
	links := make([]link, 0, len(t.chosen))
	for _, x := range t.chosen {
		links = append(links, x)
	}
	slices.SortFunc(links, func(x, y link) int {
		if x.better(y) {
			return -1
		}
		return 1
	})
	for _, x := range slices.Compact(links) { // two parts may have chosen each other
		if t.l.join(x.a, x.b) {
			t.l.assumed = append(t.l.assumed, [2]uint32{x.a, x.b})
			made++
		}
	}
	return made
}

// mark tells every node which part it holds. Children stand after their parents.
func (t *partTree) mark() {
	for i := len(t.nodes) - 1; i >= 0; i-- {
		n := &t.nodes[i]
		if n.left > 0 {
			a, b := &t.nodes[n.left], &t.nodes[n.left+1]
			n.part, n.mixed = a.part, a.mixed || b.mixed || a.part != b.part
			continue
		}
		n.part, n.mixed = t.l.find(t.ranks[n.lo]), false
		for _, r := range t.ranks[n.lo:n.hi] {
			n.mixed = n.mixed || t.l.find(r) != n.part
		}
	}
}

// largest is the part with most supervoxels, the first of equals.
func (t *partTree) largest() uint32 {
	size := make(map[uint32]int)
	best := t.l.find(t.ranks[0])
	for _, r := range t.ranks {
		part := t.l.find(r)
		size[part]++
		if size[part] > size[best] || size[part] == size[best] && part < best {
			best = part
		}
	}
	return best
}

// search improves the best link of a part by those that begin at a and end in node i.
func (t *partTree) search(i int, a, part uint32) {
	n := &t.nodes[i]
	best, found := t.chosen[part]
	if !n.mixed && n.part == part || found && n.box.away(t.l.sv.at[a]) > best.length2 {
		return
	}
	if n.left > 0 {
		near, far := n.left, n.left+1
		if t.nodes[far].box.away(t.l.sv.at[a]) < t.nodes[near].box.away(t.l.sv.at[a]) {
			near, far = far, near
		}
		t.search(near, a, part)
		t.search(far, a, part)
		return
	}
	for _, b := range t.ranks[n.lo:n.hi] {
		if t.l.find(b) == part {
			continue
		}
		if x := (link{t.l.sv.distance2(a, b), min(a, b), max(a, b)}); !found || x.better(best) {
			best, found = x, true
		}
	}
	if found {
		t.chosen[part] = best
	}
}

// away is the squared distance from a point to the box in nm², exactly.
func (b *box) away(p [3]int32) uint64 {
	var sum uint64
	for i, v := range p {
		d := max(int64(b.min[i])-int64(v), 0, int64(v)-int64(b.max[i]))
		sum += uint64(d * d)
	}
	return sum
}
