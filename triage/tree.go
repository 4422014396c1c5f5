package triage

import (
	"cmp"
	"container/heap"
	"math"
	"slices"

	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/ledger/cut"
)

// tree is a segment's shape without its loops: each supervoxel's way to the root along shortest paths that prefer sure
// contacts. After TEASAR (Sato, Bitter, Bender, Kaufman & Nakajima 2000, Pacific Graphics), on supervoxels instead of voxels:
// a length is multiplied by 1 - ln p, so that a doubtful contact between distant parts is no shortcut.
type tree struct {
	root   int32
	order  []int32   // from the root outwards: parents before children
	parent []int32   // none for the root and for roots of further pieces
	length []float64 // nm to the parent
	depth  []float64 // nm to the root along the tree
	twigs  [][]int32 // children
	ahead  []float64 // nm to the farthest leaf below
	cable  float64   // nm
}

const none int32 = -1

// doubt is the affinity that an assumed link counts as.
const doubt = 0.05

func detour(c base.Contact) float64 {
	p := c.Affinity
	switch {
	case c.Link:
		p = 1
	case c.Assumed:
		p = doubt
	}
	return 1 - math.Log(max(p, doubt))
}

// growTree roots the segment at a nucleus, else at its thickest supervoxel. O(m log n).
func growTree(c *Case) *tree {
	n := c.Len()
	t := newTree(c)
	far := make([]float64, n)
	for i := range far {
		far[i] = math.Inf(1)
	}
	done := make([]bool, n)
	grow := func(from int32) {
		far[from] = 0
		h := &reached{{from, 0}}
		for h.Len() > 0 {
			at := heap.Pop(h).(reach)
			if done[at.node] {
				continue
			}
			done[at.node] = true
			t.order = append(t.order, at.node)
			for _, a := range c.at(at.node) {
				k := c.Contacts[a.Contact]
				if d := at.cost + c.Points[at.node].Distance(c.Points[a.To])*detour(k); d < far[a.To] {
					far[a.To], t.parent[a.To] = d, at.node
					heap.Push(h, reach{a.To, d})
				}
			}
		}
	}
	grow(t.root)
	for i := range int32(n) {
		if !done[i] {
			grow(i)
		}
	}
	t.measure(c)
	return t
}

// growBonds is the other tree that a segment has: the one that its firmest contacts make (Kruskal 1956). Where two cells were
// glued together, it crosses from one to the other once, over the firmest of the contacts between them. O(m log m).
func growBonds(c *Case) *tree {
	t := newTree(c)
	order := make([]int32, len(c.Contacts))
	for i := range order {
		order[i] = int32(i)
	}
	slices.SortStableFunc(order, func(a, b int32) int { return -cmp.Compare(firmness(c.Contacts[a]), firmness(c.Contacts[b])) })
	sets := cut.NewSets(c.Len())
	bonds := make([][]int32, c.Len())
	for _, k := range order {
		if a, b := c.Contacts[k].A, c.Contacts[k].B; sets.Union(a, b) {
			bonds[a], bonds[b] = append(bonds[a], b), append(bonds[b], a)
		}
	}
	seen := make([]bool, c.Len())
	spread := func(from int32) {
		seen[from] = true
		at := len(t.order)
		for t.order = append(t.order, from); at < len(t.order); at++ {
			v := t.order[at]
			for _, k := range bonds[v] {
				if !seen[k] {
					seen[k], t.parent[k] = true, v
					t.order = append(t.order, k)
				}
			}
		}
	}
	spread(t.root)
	for i := range int32(c.Len()) {
		if !seen[i] {
			spread(i)
		}
	}
	t.measure(c)
	return t
}

func firmness(c base.Contact) float64 {
	if c.Link {
		return 2
	}
	return c.Affinity
}

func newTree(c *Case) *tree {
	n := c.Len()
	t := &tree{root: rootOf(c), parent: make([]int32, n), length: make([]float64, n), depth: make([]float64, n),
		twigs: make([][]int32, n), ahead: make([]float64, n)}
	for i := range t.parent {
		t.parent[i] = none
	}
	return t
}

// measure fills in what follows from order and parents.
func (t *tree) measure(c *Case) {
	for _, v := range t.order {
		if p := t.parent[v]; p != none {
			t.length[v] = c.Points[v].Distance(c.Points[p])
			t.depth[v] = t.depth[p] + t.length[v]
			t.twigs[p] = append(t.twigs[p], v)
			t.cable += t.length[v]
		}
	}
	for k := len(t.order) - 1; k >= 0; k-- {
		v := t.order[k]
		if p := t.parent[v]; p != none {
			t.ahead[p] = max(t.ahead[p], t.ahead[v]+t.length[v])
		}
	}
}

func rootOf(c *Case) int32 {
	if len(c.Nuclei) > 0 {
		return c.Nuclei[0].At
	}
	root := int32(0)
	for i := range c.Radius {
		if c.Radius[i] > c.Radius[root] {
			root = int32(i)
		}
	}
	return root
}

// sums adds a value of each supervoxel up over the subtree below it.
func (t *tree) sums(value func(i int32) float64) []float64 {
	out := make([]float64, len(t.parent))
	for k := len(t.order) - 1; k >= 0; k-- {
		v := t.order[k]
		out[v] += value(v)
		if p := t.parent[v]; p != none {
			out[p] += out[v]
		}
	}
	return out
}

// outwards walks from a supervoxel away from the root, each time to the child with the longest way ahead, until the path is as
// long as asked, and returns where it ends and how far it came.
func (t *tree) outwards(v int32, nm float64) (end int32, came float64) {
	for came < nm {
		next := t.onwards(v)
		if next == none {
			break
		}
		came += t.length[next]
		v = next
	}
	return v, came
}

// inwards walks towards the root.
func (t *tree) inwards(v int32, nm float64) (end int32, came float64) {
	for came < nm && t.parent[v] != none {
		came += t.length[v]
		v = t.parent[v]
	}
	return v, came
}

// onwards is the child with the longest way ahead; none at a leaf.
func (t *tree) onwards(v int32) int32 {
	next := none
	for _, k := range t.twigs[v] {
		if next == none || t.length[k]+t.ahead[k] > t.length[next]+t.ahead[next] {
			next = k
		}
	}
	return next
}

// intervals number the supervoxels so that each subtree is one run of numbers.
type intervals struct{ first, last []int32 }

func (t *tree) intervals() *intervals {
	n := len(t.parent)
	in := &intervals{first: make([]int32, n), last: make([]int32, n)}
	size := t.sums(func(int32) float64 { return 1 })
	next := int32(0)
	free := make([]int32, n) // the first number that is free below each supervoxel
	for _, v := range t.order {
		if p := t.parent[v]; p == none {
			in.first[v] = next
			next += int32(size[v])
		} else {
			in.first[v] = free[p]
			free[p] += int32(size[v])
		}
		in.last[v] = in.first[v] + int32(size[v])
		free[v] = in.first[v] + 1
	}
	return in
}

// holds says whether a supervoxel is in the subtree of another.
func (in *intervals) holds(top, v int32) bool {
	return in.first[top] <= in.first[v] && in.first[v] < in.last[top]
}

// reached is the queue of a shortest-path search; ties by the lower supervoxel, so that the tree is always the same.
type reached []reach

type reach struct {
	node int32
	cost float64
}

func (h reached) Len() int { return len(h) }
func (h reached) Less(i, j int) bool {
	return h[i].cost < h[j].cost || h[i].cost == h[j].cost && h[i].node < h[j].node
}
func (h reached) Swap(i, j int) { h[i], h[j] = h[j], h[i] }
func (h *reached) Push(x any)   { *h = append(*h, x.(reach)) }
func (h *reached) Pop() any {
	old := *h
	x := old[len(old)-1]
	*h = old[:len(old)-1]
	return x
}
