package cut

// Bridges are the edges without which their piece falls apart. One wrong
// decision of an agglomeration is often one, so they are where a split is
// looked for first.
type Bridges struct {
	// Edges holds the indices of the bridges, ascending.
	Edges []int

	order  []int32 // vertices, depth first; a subtree is one range
	under  []span  // for each bridge, the range that it cuts off
	root   []span  // for each bridge, the range of its whole piece
	aBelow []bool  // for each bridge, whether its end A is in the range
}

// span is a range [lo, hi) of Bridges.order.
type span struct{ lo, hi int32 }

// FindBridges finds all bridges in O(n + edges) by the low-link rule (Tarjan
// 1974, IPL 2:160-161), without recursion. Two edges between the same
// vertices are no bridge.
func FindBridges(n int, edges []Edge) (*Bridges, error) {
	g, err := NewGraph(n, edges)
	if err != nil {
		return nil, err
	}
	return g.Bridges(), nil
}

// walk is the state of one depth-first search.
type walk struct {
	*Graph
	order []int32
	found []int32 // place in order, plus one; 0: not yet found
	low   []int32 // smallest found that the subtree reaches without its own edge up
	next  []int32 // arcs already scanned
	up    []int32 // edge to the parent
	end   []int32 // where the subtree ends in order
}

// Bridges finds all bridges of the graph; see FindBridges.
func (g *Graph) Bridges() *Bridges {
	w := &walk{
		Graph: g, order: make([]int32, 0, g.n),
		found: make([]int32, g.n), low: make([]int32, g.n), next: make([]int32, g.n),
		up: make([]int32, g.n), end: make([]int32, g.n),
	}
	below := make([]int32, len(g.edges)) // the vertex under a bridge, plus one
	piece := make([]span, g.n)           // of a bridge's lower vertex
	for r := range int32(g.n) {
		if w.found[r] != 0 {
			continue
		}
		lo := len(w.order)
		w.from(r)
		whole := span{int32(lo), int32(len(w.order))}
		for _, v := range w.order[lo:] {
			if w.up[v] != none && w.low[v] == w.found[v] {
				below[w.up[v]], piece[v] = v+1, whole
			}
		}
	}
	return w.collect(below, piece)
}

func (w *walk) collect(below []int32, piece []span) *Bridges {
	b := &Bridges{order: w.order}
	for e, v := range below {
		if v == 0 {
			continue
		}
		v--
		b.Edges = append(b.Edges, e)
		b.under = append(b.under, span{w.found[v] - 1, w.end[v]})
		b.root = append(b.root, piece[v])
		b.aBelow = append(b.aBelow, w.edges[e].A == v)
	}
	return b
}

func (w *walk) enter(v, up int32) {
	w.order = append(w.order, v)
	w.found[v] = int32(len(w.order))
	w.low[v], w.up[v] = w.found[v], up
}

// from searches everything that hangs together with r.
func (w *walk) from(r int32) {
	w.enter(r, none)
	for v := r; ; {
		arcs := w.at(v)
		if int(w.next[v]) < len(arcs) {
			a := arcs[w.next[v]]
			w.next[v]++
			switch {
			case a.edge == w.up[v]: // the edge itself, not its twin
			case w.found[a.to] == 0:
				w.enter(a.to, a.edge)
				v = a.to
			default:
				w.low[v] = min(w.low[v], w.found[a.to])
			}
			continue
		}
		w.end[v] = int32(len(w.order))
		if w.up[v] == none {
			return
		}
		u := w.edges[w.up[v]].other(v)
		w.low[u] = min(w.low[u], w.low[v])
		v = u
	}
}

// Weigh returns, for each bridge, what lies on the side of its end A and on
// that of its end B: sums over weight, which has one value a vertex. Once the
// bridges are known, any number of weights can be asked for at O(n) each.
func (b *Bridges) Weigh(weight []int64) (a, z []int64) {
	sum := make([]int64, len(b.order)+1) // of the first i in order
	for i, v := range b.order {
		sum[i+1] = sum[i] + weight[v]
	}
	a, z = make([]int64, len(b.Edges)), make([]int64, len(b.Edges))
	for i, s := range b.under {
		below := sum[s.hi] - sum[s.lo]
		above := sum[b.root[i].hi] - sum[b.root[i].lo] - below
		if b.aBelow[i] {
			a[i], z[i] = below, above
		} else {
			a[i], z[i] = above, below
		}
	}
	return a, z
}

// Cutoff returns the vertices that bridge number i (of Edges) cuts off, and
// whether they are those on the side of its end A; the others of its piece are
// on the other. The slice is part of b: do not change it.
func (b *Bridges) Cutoff(i int) (members []int32, sideOfA bool) {
	return b.order[b.under[i].lo:b.under[i].hi], b.aBelow[i]
}
