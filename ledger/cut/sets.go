package cut

// Sets keeps n elements in disjoint sets that only grow (Tarjan 1975, JACM
// 22:215-225: union by size, path halving). It cannot undo a union: for that,
// rebuild, or see Graph.SmallerSide.
type Sets struct {
	up    []int32 // a set's root points at itself
	size  []int32 // of a root's set
	least []int32 // smallest member of a root's set
}

// NewSets returns n sets of one element each.
func NewSets(n int) *Sets {
	s := &Sets{up: make([]int32, n), size: make([]int32, n), least: make([]int32, n)}
	for v := range s.up {
		s.up[v], s.size[v], s.least[v] = int32(v), 1, int32(v)
	}
	return s
}

func (s *Sets) root(v int32) int32 {
	for s.up[v] != v {
		s.up[v] = s.up[s.up[v]]
		v = s.up[v]
	}
	return v
}

// Find returns the smallest member of v's set, which names it whatever the
// order of the unions was.
func (s *Sets) Find(v int32) int32 { return s.least[s.root(v)] }

// Size returns the number of members of v's set.
func (s *Sets) Size(v int32) int { return int(s.size[s.root(v)]) }

// Union joins the sets of a and b and says whether they were two.
func (s *Sets) Union(a, b int32) bool {
	a, b = s.root(a), s.root(b)
	if a == b {
		return false
	}
	if s.size[a] < s.size[b] {
		a, b = b, a
	}
	s.up[b] = a
	s.size[a] += s.size[b]
	s.least[a] = min(s.least[a], s.least[b])
	return true
}

// Components returns for each of n vertices the smallest one that it hangs
// together with, itself if there is none.
func Components(n int, edges []Edge) []int32 {
	s := NewSets(n)
	for i := range edges {
		s.Union(edges[i].A, edges[i].B)
	}
	label := make([]int32, n)
	for v := range label {
		label[v] = s.Find(int32(v))
	}
	return label
}
