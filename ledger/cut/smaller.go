package cut

import "slices"

// Without is the graph less some of its edges. It is not safe for concurrent
// use.
type Without struct {
	*Graph
	gone  []bool
	mark  []uint32
	epoch uint32
	front [2]front
}

// Without returns the graph with no edge taken away yet.
func (g *Graph) Without() *Without {
	return &Without{Graph: g, gone: make([]bool, len(g.edges)), mark: make([]uint32, g.n)}
}

// Delete takes edges away, by index.
func (w *Without) Delete(edges ...int) {
	for _, e := range edges {
		w.gone[e] = true
	}
}

// SmallerSide says whether a and b are apart, and if so returns the piece with
// fewer members, ascending; of two equal pieces the one with the smallest vertex
// of both.
//
// Two searches take turns, one arc each in the long run, so in a forest n
// deletions cost O(n log n) together (Even and Shiloach 1981, JACM 28:1-4).
// Where they meet only after a long way round, a call costs O(n + edges).
func (w *Without) SmallerSide(a, b int32) (side []int32, apart bool) {
	if a == b {
		return nil, false
	}
	w.begin(a, b)
	for !w.front[0].dry() && !w.front[1].dry() {
		if w.advance(0) || w.advance(1) {
			return nil, false
		}
	}
	// One piece is known whole. The other may still be the smaller one: more
	// arcs need not mean more vertices.
	whole := 0
	if !w.front[0].dry() {
		whole = 1
	}
	other := 1 - whole
	for !w.front[other].dry() && len(w.front[other].queue) <= len(w.front[whole].queue) {
		w.advance(other)
	}
	return w.pick(whole, other), true
}

func (w *Without) pick(whole, other int) []int32 {
	x, y := w.front[whole].queue, w.front[other].queue
	if len(y) < len(x) || len(y) == len(x) && slices.Min(y) < slices.Min(x) {
		x = y
	}
	return slices.Sorted(slices.Values(x))
}

func (w *Without) begin(a, b int32) {
	if w.epoch++; w.epoch == 1<<31 {
		clear(w.mark)
		w.epoch = 1
	}
	for side, v := range [2]int32{a, b} {
		f := &w.front[side]
		*f = front{queue: append(f.queue[:0], v)}
		w.mark[v] = w.epoch<<1 | uint32(side)
	}
}

// advance lets one search look at up to turn arcs, and says whether it met the
// other.
func (w *Without) advance(side int) (met bool) {
	f, mine := &w.front[side], w.epoch<<1|uint32(side)
	for budget := turn; budget > 0 && !f.dry(); budget-- {
		arcs := w.at(f.queue[f.head])
		if int(f.next) == len(arcs) {
			f.head, f.next = f.head+1, 0
			continue
		}
		a := arcs[f.next]
		f.next++
		switch {
		case w.gone[a.edge] || w.mark[a.to] == mine:
		case w.mark[a.to] == mine^1:
			return true
		default:
			w.mark[a.to] = mine
			f.queue = append(f.queue, a.to)
		}
	}
	return false
}
