package triage

import (
	"container/heap"
	"math"

	"fettle.example/fettle/ledger/base"
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
	t := &tree{root: rootOf(c), parent: make([]int32, n), length: make([]float64, n), depth: make([]float64, n), twigs: make([][]int32, n)}
	far := make([]float64, n)
	for i := range far {
		far[i], t.parent[i] = math.Inf(1), none
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
				nm := c.Points[at.node].Distance(c.Points[a.To])
				if d := at.cost + nm*detour(k); d < far[a.To] {
					far[a.To], t.parent[a.To], t.length[a.To] = d, at.node, nm
					heap.Push(h, reach{a.To, d})
				}
			}
		}
	}
	grow(t.root)
	for i := range int32(n) {
		if !done[i] {
			t.parent[i] = none
			grow(i)
		}
	}
	for _, v := range t.order {
		if p := t.parent[v]; p != none {
			t.depth[v] = t.depth[p] + t.length[v]
			t.twigs[p] = append(t.twigs[p], v)
			t.cable += t.length[v]
		}
	}
	return t
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

// outwards walks from a supervoxel away from its parent, each time to the child with the longest way ahead, until the path
// is as long as asked, and returns where it ends and how far it came.
func (t *tree) outwards(v int32, ahead []float64, nm float64) (end int32, came float64) {
	for came < nm {
		next := none
		for _, k := range t.twigs[v] {
			if next == none || t.length[k]+ahead[k] > t.length[next]+ahead[next] {
				next = k
			}
		}
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

// heights is how far the farthest leaf below each supervoxel is, nm.
func (t *tree) heights() []float64 {
	out := make([]float64, len(t.parent))
	for k := len(t.order) - 1; k >= 0; k-- {
		v := t.order[k]
		if p := t.parent[v]; p != none {
			out[p] = max(out[p], out[v]+t.length[v])
		}
	}
	return out
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
