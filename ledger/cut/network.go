package cut

import (
	"math"
	"slices"

	"fettle.example/fettle/internal/fault"
)

// Result is one minimum cut.
type Result struct {
	// Side holds the vertices of the returned side, ascending. Of the two
	// sides that are least by inclusion (all that the first group still
	// reaches once the flow is maximal, and all that still reaches the second)
	// it is the one with fewer members; the first group's if they are equal.
	// Those two sets are the same for every maximum flow, which makes the
	// answer canonical. Everything else stays together on the other side.
	Side []int32
	// FirstGroup says that Side holds the first group, and not the second.
	FirstGroup bool
	// Flow is the value of the maximum flow, Capacity the sum over Cut. They
	// are found separately and are equal, which proves both. In units.
	Flow, Capacity int64
	// Cut holds the indices of the edges with one end in Side, ascending.
	Cut []int
	// Ambiguous is the number of vertices that could go to either side at the
	// same cost; they were left on the larger. Zero means that the minimum
	// cut is unique. -1 means that nobody counted (see Network.Cut).
	Ambiguous int
}

// Unique says that no other division of the vertices is as cheap.
func (r *Result) Unique() bool { return r.Ambiguous == 0 }

// Min returns the minimum cut between the groups first and second of a graph
// of n vertices, and counts the ambiguous ones.
//
// It refuses, as fault.Invalid: an empty group, a vertex in both groups, a
// vertex or an edge's end outside 0..n-1, a capacity below one unit. Groups
// that are already apart are no error: the cut is empty and costs nothing.
func Min(n int, edges []Edge, first, second []int32) (Result, error) {
	w, err := NewNetwork(n, edges)
	if err != nil {
		return Result{}, err
	}
	r, err := w.Cut(first, second)
	if err != nil {
		return Result{}, err
	}
	r.Ambiguous = w.ambiguous()
	return r, nil
}

// Network is a graph with a flow on it. It may answer many questions, one
// after the other: each leaves only what it touched to be cleared by the next,
// so that a small cut in a large graph costs by its smaller side. It is not
// safe for concurrent use.
type Network struct {
	*Graph
	size []int64 // what each vertex counts for; nil: one each

	// flow on each edge, positive from A to B. Undirected edges need one
	// number for both directions: from A there is room for capacity-flow, from
	// B for capacity+flow.
	flow  []int64
	dirty []int32 // edges that have or had a flow

	// epoch stamps the vertices of one search, so that a search begins by
	// counting up and not by clearing n marks.
	epoch  uint32
	mark   []uint32 // epoch<<1 | side, of the search that last saw the vertex
	parent []int32  // edge by which it was reached; none for group members
	front  [2]front
	forest *forest // working state of the second method, once needed
}

// none stands where an edge's index could, for a vertex that has no parent.
const none int32 = -1

// maxTotal bounds the sum of capacities: twice an edge's capacity is the most
// that any sum here holds.
const maxTotal = math.MaxInt64 / 4

// NewNetwork lays out the network. It keeps edges; time and memory are
// O(n + edges).
func NewNetwork(n int, edges []Edge) (*Network, error) {
	g, err := NewGraph(n, edges)
	if err != nil {
		return nil, err
	}
	var total int64
	for i := range edges {
		c := edges[i].Capacity
		if c < MinCapacity || c > maxTotal-total {
			return nil, fault.Newf(fault.Invalid, "capacity-out-of-range",
				"edge %d has a capacity of %d units", i, c).
				WithNext("Give every edge at least one unit, and all of them fewer than 2^61.")
		}
		total += c
	}
	return &Network{
		Graph:  g,
		flow:   make([]int64, len(edges)),
		mark:   make([]uint32, n),
		parent: make([]int32, n),
	}, nil
}

// SetSizes says what each vertex counts for when the smaller side is chosen,
// for networks in which one vertex stands for many. Without it each counts
// one, and nil makes it so again. Sizes must be at least one.
func (w *Network) SetSizes(size []int64) error {
	if size != nil && len(size) != w.n {
		return fault.Newf(fault.Invalid, "sizes-do-not-fit",
			"%d sizes were given for %d vertices", len(size), w.n).
			WithNext("Give one size for each vertex.")
	}
	for v, s := range size {
		if s < 1 {
			return fault.Newf(fault.Invalid, "sizes-do-not-fit",
				"vertex %d was given the size %d", v, s).
				WithNext("Give each vertex a size of at least one.")
		}
	}
	w.size = size
	return nil
}

// Cut returns the minimum cut between two groups, refusing what Min refuses.
// It looks at no more of the graph than the smaller side makes necessary, and
// so leaves Ambiguous uncounted (-1).
func (w *Network) Cut(first, second []int32) (Result, error) {
	if err := w.check(first, second); err != nil {
		return Result{}, err
	}
	w.clear()
	flow := w.maximize(first, second)
	side := w.smallerFront()
	r := Result{
		Side:       slices.Sorted(slices.Values(w.front[side].queue)),
		FirstGroup: side == 0,
		Flow:       flow,
		Ambiguous:  -1,
	}
	w.close(&r, side)
	if r.Flow != r.Capacity {
		return Result{}, fault.Newf(fault.Internal, "cut-unproven",
			"the flow of %d units does not equal the cut of %d", r.Flow, r.Capacity).
			WithNext("Report this with the segment and the groups: nothing was changed.")
	}
	return r, nil
}

// FlowOn returns the flow that the last Cut left on an edge, in units and
// positive from A to B. It is one of many maximum flows: only its value and
// the sides it leaves are canonical.
func (w *Network) FlowOn(edge int) int64 { return w.flow[edge] }

func (w *Network) check(first, second []int32) error {
	if len(first) == 0 || len(second) == 0 {
		return fault.New(fault.Invalid, "group-empty", "a group to cut apart is empty").
			WithNext("Name at least one point on each side.")
	}
	in := make(map[int32]struct{}, len(first))
	for _, group := range [][]int32{first, second} {
		for _, v := range group {
			if v < 0 || int(v) >= w.n {
				return fault.Newf(fault.Invalid, "vertex-out-of-range",
					"vertex %d is in a group, but vertices are 0 to %d", v, w.n-1).
					WithNext("Name vertices of this graph.")
			}
		}
	}
	for _, v := range first {
		in[v] = struct{}{}
	}
	for _, v := range second {
		if _, both := in[v]; both {
			return fault.Newf(fault.Invalid, "vertex-in-both-groups",
				"vertex %d is in both groups", v).WithData("vertex", v).
				WithNext("Take it out of one group: a vertex is never divided.")
		}
	}
	return nil
}

// clear takes the flow of the last question off the edges that had it.
func (w *Network) clear() {
	for _, e := range w.dirty {
		w.flow[e] = 0
	}
	w.dirty = w.dirty[:0]
}

// room returns how much more can flow from v over the edge e.
func (w *Network) room(v, e int32) int64 {
	edge := &w.edges[e]
	if edge.A == v {
		return edge.Capacity - w.flow[e]
	}
	return edge.Capacity + w.flow[e]
}

// push lets amount more flow from v over the edge e.
func (w *Network) push(v, e int32, amount int64) {
	if w.flow[e] == 0 {
		w.dirty = append(w.dirty, e)
	}
	if w.edges[e].A == v {
		w.flow[e] += amount
	} else {
		w.flow[e] -= amount
	}
}

// close finds the edges that leave the side, and what they add up to.
func (w *Network) close(r *Result, side int) {
	inside := w.stamp(side)
	for _, v := range r.Side {
		for _, a := range w.at(v) {
			if w.mark[a.to] != inside {
				r.Cut = append(r.Cut, int(a.edge))
				r.Capacity += w.edges[a.edge].Capacity
			}
		}
	}
	slices.Sort(r.Cut)
}
