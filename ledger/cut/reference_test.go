package cut

import (
	"math"
	"slices"
)

// Two slow methods that share no code with the package.

// byExhaustion looks at every division of up to 20 vertices. The least sides
// of a minimum cut are the intersections of all minimal sides, because those
// are closed under intersection and union.
func byExhaustion(n int, edges []Edge, first, second []int32) Result {
	var s, t uint32
	for _, v := range first {
		s |= 1 << v
	}
	for _, v := range second {
		t |= 1 << v
	}
	all := uint32(1)<<n - 1
	best, leastS, leastT := int64(math.MaxInt64), all, all
	for x := uint32(0); x <= all; x++ {
		if x&s != s || x&t != 0 {
			continue
		}
		var cost int64
		for _, e := range edges {
			if x>>e.A&1 != x>>e.B&1 {
				cost += e.Capacity
			}
		}
		if cost < best {
			best, leastS, leastT = cost, all, all
		}
		if cost == best {
			leastS, leastT = leastS&x, leastT&^x
		}
	}
	return canonical(n, edges, best, members(n, leastS), members(n, leastT))
}

func members(n int, x uint32) []int32 {
	var m []int32
	for v := range int32(n) {
		if x>>v&1 == 1 {
			m = append(m, v)
		}
	}
	return m
}

// canonical states what the answer must be, given both least sides.
func canonical(n int, edges []Edge, flow int64, s, t []int32) Result {
	r := Result{Side: s, FirstGroup: true, Flow: flow, Ambiguous: n - len(s) - len(t)}
	if len(t) < len(s) {
		r.Side, r.FirstGroup = t, false
	}
	for i, e := range edges {
		if slices.Contains(r.Side, e.A) != slices.Contains(r.Side, e.B) {
			r.Cut = append(r.Cut, i)
			r.Capacity += e.Capacity
		}
	}
	return r
}

// plainNetwork is a textbook network of arc pairs with one source and one
// sink, tied to the groups by arcs that no flow can fill.
type plainNetwork struct {
	n        int
	to       []int32
	room     []int64
	out      [][]int32 // arcs by vertex; arc^1 is the way back
	src, snk int32
}

func newPlainNetwork(n int, edges []Edge, first, second []int32) *plainNetwork {
	p := &plainNetwork{n: n, out: make([][]int32, n+2), src: int32(n), snk: int32(n + 1)}
	beyond := int64(1)
	for _, e := range edges {
		p.add(e.A, e.B, e.Capacity, e.Capacity)
		beyond += e.Capacity
	}
	for _, v := range first {
		p.add(p.src, v, beyond, 0)
	}
	for _, v := range second {
		p.add(v, p.snk, beyond, 0)
	}
	return p
}

func (p *plainNetwork) add(a, b int32, there, back int64) {
	p.out[a] = append(p.out[a], int32(len(p.to)))
	p.out[b] = append(p.out[b], int32(len(p.to)+1))
	p.to = append(p.to, b, a)
	p.room = append(p.room, there, back)
}

// edmondsKarp augments along shortest paths (Edmonds and Karp 1972, JACM
// 19:248).
func (p *plainNetwork) edmondsKarp() (flow int64) {
	for {
		by := make([]int32, p.n+2)
		for v := range by {
			by[v] = -1
		}
		queue := []int32{p.src}
		for i := 0; i < len(queue) && by[p.snk] < 0; i++ {
			for _, a := range p.out[queue[i]] {
				if v := p.to[a]; p.room[a] > 0 && by[v] < 0 && v != p.src {
					by[v] = a
					queue = append(queue, v)
				}
			}
		}
		if by[p.snk] < 0 {
			return flow
		}
		amount := int64(math.MaxInt64)
		for v := p.snk; v != p.src; v = p.to[by[v]^1] {
			amount = min(amount, p.room[by[v]])
		}
		for v := p.snk; v != p.src; v = p.to[by[v]^1] {
			p.room[by[v]] -= amount
			p.room[by[v]^1] += amount
		}
		flow += amount
	}
}

// dinic is a second plain method (Dinic 1970), against which the first is held:
// levels from the source, then a blocking flow by an iterative search.
func (p *plainNetwork) dinic() (flow int64) {
	level, next := make([]int32, p.n+2), make([]int, p.n+2)
	for p.levels(level) {
		clear(next)
		var path []int32
		for v := p.src; ; {
			if v == p.snk {
				amount := int64(math.MaxInt64)
				for _, a := range path {
					amount = min(amount, p.room[a])
				}
				for _, a := range path {
					p.room[a] -= amount
					p.room[a^1] += amount
				}
				flow += amount
				full := slices.IndexFunc(path, func(a int32) bool { return p.room[a] == 0 })
				v = p.to[path[full]^1]
				path = path[:full]
				continue
			}
			if next[v] == len(p.out[v]) {
				if v == p.src {
					break
				}
				level[v] = -1
				v = p.to[path[len(path)-1]^1]
				path = path[:len(path)-1]
				next[v]++
				continue
			}
			a := p.out[v][next[v]]
			if p.room[a] > 0 && level[p.to[a]] == level[v]+1 {
				path = append(path, a)
				v = p.to[a]
			} else {
				next[v]++
			}
		}
	}
	return flow
}

func (p *plainNetwork) levels(level []int32) bool {
	for v := range level {
		level[v] = -1
	}
	level[p.src] = 0
	queue := []int32{p.src}
	for i := 0; i < len(queue); i++ {
		for _, a := range p.out[queue[i]] {
			if v := p.to[a]; p.room[a] > 0 && level[v] < 0 {
				level[v] = level[queue[i]] + 1
				queue = append(queue, v)
			}
		}
	}
	return level[p.snk] >= 0
}

// leastSides returns what the source still reaches, and what still reaches
// the sink.
func (p *plainNetwork) leastSides() (s, t []int32) {
	return p.residual(p.src, 0), p.residual(p.snk, 1)
}

func (p *plainNetwork) residual(from int32, against int32) []int32 {
	seen := make([]bool, p.n+2)
	seen[from] = true
	queue := []int32{from}
	for i := 0; i < len(queue); i++ {
		for _, a := range p.out[queue[i]] {
			if v := p.to[a]; p.room[a^against] > 0 && !seen[v] {
				seen[v] = true
				queue = append(queue, v)
			}
		}
	}
	queue = queue[1:]
	slices.Sort(queue)
	return queue
}
