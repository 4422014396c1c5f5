package synth

// unionFind joins pieces into components.
type unionFind struct{ parent []int }

func newUnionFind(n int) *unionFind {
	u := &unionFind{make([]int, n)}
	for i := range u.parent {
		u.parent[i] = i
	}
	return u
}

func (u *unionFind) find(v int) int {
	for u.parent[v] != v {
		u.parent[v] = u.parent[u.parent[v]]
		v = u.parent[v]
	}
	return v
}

// union returns the root of both: the smaller number, so that it doesn't depend on the order.
func (u *unionFind) union(a, b int) int {
	a, b = u.find(a), u.find(b)
	if a > b {
		a, b = b, a
	}
	u.parent[b] = a
	return a
}

// components joins the pieces by the contacts that are accepted.
func (t *tissue) components() *unionFind {
	u := newUnionFind(len(t.pieces))
	for _, list := range [][]joint{t.own, t.touch} {
		for _, j := range list {
			if j.affinity >= threshold {
				u.union(j.a, j.b)
			}
		}
	}
	return u
}
