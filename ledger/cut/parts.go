package cut

import (
	"slices"

	"fettle.example/fettle/internal/fault"
)

// Parts returns the connected pieces that are left of the graph once every
// edge between side and the rest is gone: those inside the side, and those
// outside. Members ascend within a part, and parts by their smallest member.
// An unknown vertex in side is fault.Invalid.
//
// If side is that of a minimum cut and the graph was connected, every part
// holds a member of a group, so a cut never makes crumbs that nobody asked for:
//
//   - Side. Call it that of the first group; the other case mirrors it. Each
//     of its vertices was reached from the group over edges with room. Such a
//     way never leaves the side, since all it reaches is in the side. So it
//     uses no cut edge, and ends in a member of the same part.
//   - Rest. Suppose a part of it held no member of the second group. All its
//     edges outwards lead to the side, for those to the rest of the rest would
//     make it one part with them. As the graph was connected there is one, and
//     it costs at least one unit. Moving the part to the side would save it
//     and cost nothing, so the cut was not minimal.
//
// A piece that was apart from both groups from the beginning is in the rest,
// as a part of its own.
func (g *Graph) Parts(side []int32) (inside, outside [][]int32, err error) {
	in := make([]bool, g.n)
	for _, v := range side {
		if v < 0 || int(v) >= g.n {
			return nil, nil, fault.Newf(fault.Invalid, "vertex-out-of-range",
				"vertex %d is in the side, but vertices are 0 to %d", v, g.n-1).
				WithNext("Name vertices of this graph.")
		}
		in[v] = true
	}
	seen := make([]bool, g.n)
	for r := range int32(g.n) {
		if seen[r] {
			continue
		}
		if part := g.part(r, in, seen); in[r] {
			inside = append(inside, part)
		} else {
			outside = append(outside, part)
		}
	}
	return inside, outside, nil
}

// part collects what hangs together with r on its own side.
func (g *Graph) part(r int32, in, seen []bool) []int32 {
	seen[r] = true
	part := []int32{r}
	for i := 0; i < len(part); i++ {
		for _, a := range g.at(part[i]) {
			if !seen[a.to] && in[a.to] == in[r] {
				seen[a.to] = true
				part = append(part, a.to)
			}
		}
	}
	slices.Sort(part)
	return part
}

// Parts is Graph.Parts for a graph that is needed but once.
func Parts(n int, edges []Edge, side []int32) (inside, outside [][]int32, err error) {
	g, err := NewGraph(n, edges)
	if err != nil {
		return nil, nil, err
	}
	return g.Parts(side)
}
