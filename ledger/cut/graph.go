package cut

import (
	"math"

	"fettle.example/fettle/internal/fault"
)

// Edge joins vertices A and B, either way round. Capacity, in units, is what
// cutting it costs; only minimum cuts look at it. Edges between the same two
// vertices add up; an edge from a vertex to itself is ignored.
type Edge struct {
	A, B     int32
	Capacity int64
}

// other returns the end of e that is not v.
func (e *Edge) other(v int32) int32 {
	if e.A == v {
		return e.B
	}
	return e.A
}

// arc is one edge as seen from one of its ends.
type arc struct{ to, edge int32 }

// Graph is an undirected graph laid out for walking: the arcs of vertex v are
// arcs[start[v]:start[v+1]]. It keeps the edges it was given and never writes
// to them, and is safe for concurrent use.
type Graph struct {
	n     int
	edges []Edge
	start []int32
	arcs  []arc
}

// maxVertices and maxEdges let vertices and arcs (two an edge) fit in int32.
const (
	maxVertices = math.MaxInt32
	maxEdges    = math.MaxInt32 / 2
)

// NewGraph lays out n vertices and the edges between them. It takes time and
// memory O(n + edges) and keeps edges. An end outside 0..n-1 is fault.Invalid.
func NewGraph(n int, edges []Edge) (*Graph, error) {
	if n < 0 || n > maxVertices || len(edges) > maxEdges {
		return nil, fault.Newf(fault.Invalid, "graph-too-large",
			"a graph of %d vertices and %d edges cannot be laid out", n, len(edges)).
			WithNext("Ask about a smaller segment.")
	}
	g := &Graph{n: n, edges: edges, start: make([]int32, n+2)}
	if err := g.count(); err != nil {
		return nil, err
	}
	g.place()
	return g, nil
}

// count leaves in start[v+2] how many arcs the vertices up to v have.
func (g *Graph) count() error {
	for i := range g.edges {
		e := &g.edges[i]
		if e.A < 0 || e.B < 0 || int(e.A) >= g.n || int(e.B) >= g.n {
			return fault.Newf(fault.Invalid, "vertex-out-of-range",
				"edge %d joins vertices %d and %d, but vertices are 0 to %d", i, e.A, e.B, g.n-1).
				WithNext("Give edges between vertices of this graph.")
		}
		if e.A != e.B {
			g.start[e.A+2]++
			g.start[e.B+2]++
		}
	}
	for v := 2; v < len(g.start); v++ {
		g.start[v] += g.start[v-1]
	}
	return nil
}

// place writes the arcs; start[v+1] is where the next arc of v goes, and ends
// as the place where those of v+1 begin.
func (g *Graph) place() {
	g.arcs = make([]arc, g.start[g.n+1])
	for i := range g.edges {
		e := &g.edges[i]
		if e.A == e.B {
			continue
		}
		g.arcs[g.start[e.A+1]] = arc{e.B, int32(i)}
		g.start[e.A+1]++
		g.arcs[g.start[e.B+1]] = arc{e.A, int32(i)}
		g.start[e.B+1]++
	}
	g.start = g.start[:g.n+1]
}

// Len returns the number of vertices.
func (g *Graph) Len() int { return g.n }

func (g *Graph) at(v int32) []arc { return g.arcs[g.start[v]:g.start[v+1]] }
