package cut

// Augmenting paths by two searches that advance in turns, one from each group.
// When either runs dry, no path is left and the flow is maximal: the search
// that is dry has found the least side of its group, and the rest of the graph
// was never looked at.

// turn is how many arcs one search looks at before it is the other's turn.
// Counting arcs, not vertices, keeps a hub on one side from being paid for by
// the other.
const turn = 32

// patience is the number of paths that are found by starting anew each time.
// Typical false merges need 5 to 22. Wide ones need hundreds, and for those
// the trees of forest.go, which survive from path to path, are worth their
// upkeep.
const patience = 32

// front is a breadth-first search that can be interrupted after any arc. Its
// queue is never emptied: it is the list of all vertices reached.
type front struct {
	queue   []int32
	head    int   // the vertex now scanned
	next    int32 // arcs of it already scanned
	scanned int64 // arcs in all
	size    int64 // of all vertices reached
}

func (f *front) dry() bool { return f.head == len(f.queue) }

// meeting is an edge with room on it, from a vertex that the first group
// reaches to one that reaches the second.
type meeting struct{ from, to, edge int32 }

// maximize finds a maximum flow between the groups and returns its value. It
// leaves two searches that have not met, at least one of them dry.
func (w *Network) maximize(first, second []int32) int64 {
	var total int64
	for round := 0; ; round++ {
		w.begin(first, second)
		m, met := w.search()
		if !met {
			return total
		}
		total += w.augment(m)
		if round == patience {
			total += w.growForest(first, second)
		}
	}
}

// begin starts both searches anew.
func (w *Network) begin(first, second []int32) {
	if w.epoch++; w.epoch == 1<<31 {
		clear(w.mark)
		w.epoch = 1
	}
	for side, group := range [2][]int32{first, second} {
		f := &w.front[side]
		*f = front{queue: f.queue[:0]}
		for _, v := range group {
			if w.mark[v] != w.stamp(side) {
				w.reach(f, side, v, none)
			}
		}
	}
}

// stamp is the mark of a vertex that the side reached in this search.
func (w *Network) stamp(side int) uint32 { return w.epoch<<1 | uint32(side) }

func (w *Network) reach(f *front, side int, v, by int32) {
	w.mark[v] = w.stamp(side)
	w.parent[v] = by
	f.queue = append(f.queue, v)
	if w.size == nil {
		f.size++
	} else {
		f.size += w.size[v]
	}
}

// search advances both searches in turns until they meet, or one is dry.
func (w *Network) search() (meeting, bool) {
	for {
		for side := range w.front {
			if m, met := w.advance(side, turn); met {
				return m, true
			}
			if w.front[side].dry() {
				return meeting{}, false
			}
		}
	}
}

// advance lets one search look at up to budget arcs.
func (w *Network) advance(side int, budget int32) (meeting, bool) {
	f, mine, theirs := &w.front[side], w.stamp(side), w.stamp(1-side)
	for budget > 0 && !f.dry() {
		v := f.queue[f.head]
		all := w.at(v)
		arcs := all[f.next:]
		if int32(len(arcs)) > budget {
			arcs = arcs[:budget]
		}
		for _, a := range arcs {
			if m := w.mark[a.to]; m == mine || !w.open(side, v, a) {
				continue
			} else if m == theirs {
				return orient(side, v, a), true
			}
			w.reach(f, side, a.to, a.edge)
		}
		f.next += int32(len(arcs))
		f.scanned += int64(len(arcs))
		budget -= int32(len(arcs)) + 1 // a vertex without arcs costs as well
		if int(f.next) == len(all) {
			f.head, f.next = f.head+1, 0
		}
	}
	return meeting{}, false
}

// open says that the side's search may pass the arc of v: along the flow's
// room from the first group, against it from the second.
func (w *Network) open(side int, v int32, a arc) bool {
	if w.flow[a.edge] == 0 {
		return true // and so the edge itself need not be fetched
	}
	if side == 0 {
		return w.room(v, a.edge) > 0
	}
	return w.room(a.to, a.edge) > 0
}

func orient(side int, v int32, a arc) meeting {
	if side == 0 {
		return meeting{v, a.to, a.edge}
	}
	return meeting{a.to, v, a.edge}
}

// augment lets as much flow as fits along the path through the meeting, and
// returns how much that was.
func (w *Network) augment(m meeting) int64 {
	amount := w.room(m.from, m.edge)
	for v := m.from; w.parent[v] != none; {
		u := w.edges[w.parent[v]].other(v)
		amount = min(amount, w.room(u, w.parent[v]))
		v = u
	}
	for v := m.to; w.parent[v] != none; {
		amount = min(amount, w.room(v, w.parent[v]))
		v = w.edges[w.parent[v]].other(v)
	}
	w.push(m.from, m.edge, amount)
	for v := m.from; w.parent[v] != none; {
		u := w.edges[w.parent[v]].other(v)
		w.push(u, w.parent[v], amount)
		v = u
	}
	for v := m.to; w.parent[v] != none; {
		w.push(v, w.parent[v], amount)
		v = w.edges[w.parent[v]].other(v)
	}
	return amount
}

// smallerFront returns the side whose least set is smaller, the first if they
// are equal, and leaves that side's search dry. The other search goes on only
// until it is known to be larger.
func (w *Network) smallerFront() int {
	first, second := &w.front[0], &w.front[1]
	if first.dry() {
		for !second.dry() && second.size < first.size {
			w.advance(1, turn)
		}
		if second.size < first.size {
			return 1
		}
		return 0
	}
	for !first.dry() && first.size <= second.size {
		w.advance(0, turn)
	}
	if first.size <= second.size {
		return 0
	}
	return 1
}

// ambiguous runs both searches to their ends and counts the vertices that
// neither reached.
func (w *Network) ambiguous() int {
	left := w.n
	for side := range w.front {
		f := &w.front[side]
		for !f.dry() {
			w.advance(side, turn)
		}
		left -= len(f.queue)
	}
	return left
}
