package cut

// The second method, for wide cuts: two trees of vertices, one grown from each
// group, that are mended after each path instead of being grown anew (Boykov
// and Kolmogorov 2004, IEEE PAMI 26:1124). Our trees take turns, and growth
// ends when either is whole: its vertices then have no room left towards
// anything outside, so the flow is maximal. maximize searches once more
// afterwards and does not take our word for it.

// orphaned stands for the parent of a vertex whose edge to it is full.
const orphaned int32 = -2

// forest is the state of the trees. Parents are in Network.parent.
type forest struct {
	tree    []uint8 // 0: none; side+1
	queued  []uint8 // bit by side: stands in that side's queue
	depth   []int32 // distance to the group, as it was at
	seen    []int32 // this clock; each path is one tick
	clock   int32
	active  [2]lane
	orphans []int32
	touched []int32
}

// lane is the queue of those vertices of a tree that may still grow.
type lane struct {
	queue   []int32
	head    int
	scanned int64
}

// growForest augments until one tree is whole; it returns the flow it added.
func (w *Network) growForest(first, second []int32) int64 {
	f := w.plant(first, second)
	var total int64
	for {
		side := 0
		if f.active[1].scanned < f.active[0].scanned {
			side = 1
		}
		v, ok := f.active[side].peek(f, side)
		if !ok {
			return total
		}
		m, met := w.expand(f, side, v)
		if !met {
			f.active[side].pop(f, side)
			continue
		}
		total += w.augment(m)
		f.clock++
		w.orphan(f, m)
		w.adopt(f)
	}
}

// plant makes both trees anew, each of its group alone.
func (w *Network) plant(first, second []int32) *forest {
	if w.forest == nil {
		w.forest = &forest{
			tree: make([]uint8, w.n), queued: make([]uint8, w.n),
			depth: make([]int32, w.n), seen: make([]int32, w.n),
		}
	}
	f := w.forest
	for _, v := range f.touched {
		f.tree[v], f.queued[v] = 0, 0
	}
	f.touched, f.clock = f.touched[:0], f.clock+1
	for side, group := range [2][]int32{first, second} {
		f.active[side] = lane{queue: f.active[side].queue[:0]}
		for _, v := range group {
			w.parent[v], f.depth[v], f.seen[v] = none, 0, f.clock
			f.tree[v] = uint8(side + 1)
			f.touched = append(f.touched, v)
			f.activate(side, v)
		}
	}
	return f
}

func (f *forest) activate(side int, v int32) {
	if bit := uint8(1) << side; f.queued[v]&bit == 0 {
		f.queued[v] |= bit
		f.active[side].queue = append(f.active[side].queue, v)
	}
}

// peek returns the first vertex that still belongs to the side's tree.
func (l *lane) peek(f *forest, side int) (int32, bool) {
	for l.head < len(l.queue) {
		if v := l.queue[l.head]; f.tree[v] == uint8(side+1) {
			return v, true
		}
		l.pop(f, side)
	}
	return 0, false
}

func (l *lane) pop(f *forest, side int) {
	f.queued[l.queue[l.head]] &^= 1 << side
	l.head++
}

// expand adds the free neighbours of v to its tree, unless it finds one in the
// other tree.
func (w *Network) expand(f *forest, side int, v int32) (meeting, bool) {
	arcs := w.at(v)
	f.active[side].scanned += int64(len(arcs)) + 1
	for _, a := range arcs {
		if !w.open(side, v, a) {
			continue
		}
		switch u := a.to; f.tree[u] {
		case 0:
			f.tree[u] = uint8(side + 1)
			w.parent[u], f.seen[u], f.depth[u] = a.edge, f.seen[v], f.depth[v]+1
			f.touched = append(f.touched, u)
			f.activate(side, u)
		case uint8(side + 1):
			if f.seen[u] <= f.seen[v] && f.depth[u] > f.depth[v] { // a shorter way
				w.parent[u], f.seen[u], f.depth[u] = a.edge, f.seen[v], f.depth[v]+1
			}
		default:
			return orient(side, v, a), true
		}
	}
	return meeting{}, false
}

// orphan takes the parents off those on the path whose edge to it is full.
func (w *Network) orphan(f *forest, m meeting) {
	for side, v := range [2]int32{m.from, m.to} {
		for w.parent[v] != none {
			e := w.parent[v]
			u := w.edges[e].other(v)
			if !w.open(side, u, arc{v, e}) {
				w.parent[v] = orphaned
				f.orphans = append(f.orphans, v)
			}
			v = u
		}
	}
}

// adopt finds each orphan a new parent in its tree, or frees it, which makes
// orphans of its children.
func (w *Network) adopt(f *forest) {
	for i := 0; i < len(f.orphans); i++ {
		v := f.orphans[i]
		side := int(f.tree[v]) - 1
		best := none
		for _, a := range w.at(v) {
			if f.tree[a.to] != f.tree[v] || !w.open(side, a.to, arc{v, a.edge}) {
				continue
			}
			if d, rooted := w.rooted(f, a.to); rooted && (best == none || d < f.depth[v]-1) {
				best, f.depth[v] = a.edge, d+1
			}
		}
		if best != none {
			w.parent[v], f.seen[v] = best, f.clock
			continue
		}
		w.free(f, side, v)
	}
	f.orphans = f.orphans[:0]
}

func (w *Network) free(f *forest, side int, v int32) {
	for _, a := range w.at(v) {
		u := a.to
		if f.tree[u] != f.tree[v] {
			continue
		}
		if w.open(side, u, arc{v, a.edge}) {
			f.activate(side, u)
		}
		if w.parent[u] == a.edge {
			w.parent[u] = orphaned
			f.orphans = append(f.orphans, u)
		}
	}
	f.tree[v] = 0
}

// rooted says whether v hangs together with its group, and how far from it.
// What it finds on the way is remembered until the next path.
func (w *Network) rooted(f *forest, v int32) (int32, bool) {
	var d int32
	at := v
	for f.seen[at] != f.clock {
		switch p := w.parent[at]; p {
		case orphaned:
			return 0, false
		case none:
			f.seen[at], f.depth[at] = f.clock, 0
		default:
			at, d = w.edges[p].other(at), d+1
		}
	}
	d += f.depth[at]
	for k := d; f.seen[v] != f.clock; k-- {
		f.seen[v], f.depth[v] = f.clock, k
		v = w.edges[w.parent[v]].other(v)
	}
	return d, true
}
