package triage

import (
	"math"
	"math/rand/v2"
	"testing"

	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/ledger/cut"
)

// Synapse flow centrality of Schneider-Mizell et al. 2016 (eLife 5:e12059, Methods) on a tree of nine nodes, against an enumeration
// of all paths with networkx.
func TestFlowCentrality(t *testing.T) {
	parent := map[int]int{2: 1, 3: 2, 4: 3, 5: 3, 6: 2, 7: 6, 8: 7, 9: 7}
	in := map[int]int64{4: 5, 5: 4, 3: 1, 8: 1}
	out := map[int]int64{8: 4, 9: 3, 7: 1, 4: 1}
	want := map[int]flow{2: {0, 0}, 3: {1, 80}, 4: {6, 40}, 5: {0, 36}, 6: {80, 1}, 7: {80, 1}, 8: {40, 5}, 9: {33, 0}}
	for node, w := range want {
		var below, belowOut, all, allOut int64
		for v := 1; v <= 9; v++ {
			all, allOut = all+in[v], allOut+out[v]
			for up := v; up != 0; up = parent[up] {
				if up == node {
					below, belowOut = below+in[v], belowOut+out[v]
				}
			}
		}
		if got := newFlow(below, belowOut, all, allOut); got != w {
			t.Errorf("above %d: %+v, want %+v", node, got, w)
		}
	}
}

// Worked by hand: four arms that pair up two and two, and the four of a tetrahedron, whose angles are all 109.4712°.
func TestPairingOfArms(t *testing.T) {
	p, ok := bestPairing([]base.Point{{1, 0, 0}, {-1, .05, 0}, {.1, 1, .05}, {0, -1, .1}})
	if !ok || p.arms != [4]int{0, 1, 2, 3} || math.Abs(p.first-177.1376) > 1e-4 || math.Abs(p.second-169.7149) > 1e-4 {
		t.Errorf("%+v %v", p, ok)
	}
	if want := 177.1553 - 13.1475; math.Abs(p.margin-want) > 1e-3 {
		t.Errorf("the next pairing is worse by %v, want %v", p.margin, want)
	}
	if p, ok := bestPairing([]base.Point{{1, 1, 1}, {1, -1, -1}, {-1, 1, -1}, {-1, -1, 1}}); ok || math.Abs(p.first-109.4712) > 1e-4 {
		t.Errorf("a tetrahedron has no pairs: %+v", p)
	}
}

// Angles near 0 and 180 keep their digits.
func TestAngles(t *testing.T) {
	for _, c := range []struct {
		u, v base.Point
		want float64
	}{
		{base.Point{1, 0, 0}, base.Point{0, 1, 0}, 90},
		{base.Point{1, 0, 0}, base.Point{-1, 0, 0}, 180},
		{base.Point{1, 0, 0}, base.Point{1, 1e-9, 0}, 1e-9 * 180 / math.Pi},
	} {
		if got := angle(c.u, c.v); math.Abs(got-c.want) > 1e-12*max(1, c.want) {
			t.Errorf("angle of %v and %v: %v, want %v", c.u, c.v, got, c.want)
		}
	}
}

// TestWeakPlacesWeighTheirCuts compares the weight of every weak place with a plain sum over the contacts that cross.
func TestWeakPlacesWeighTheirCuts(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 9))
	places := 0
	for range 60 {
		d := new(drawing)
		n := 12 + rng.IntN(40)
		for i := range n {
			d.neurite(1, base.Point{rng.Float64() * 5000, rng.Float64() * 5000, rng.Float64() * 5000}, base.Point{}, 100)
			if i > 0 {
				d.touch(int32(rng.IntN(i)), int32(i), 0.3+0.7*rng.Float64())
			}
		}
		seen := make(map[[2]int32]bool)
		for _, c := range d.v.Contacts {
			seen[[2]int32{c.A, c.B}] = true
		}
		for range n / 3 {
			a, b := int32(rng.IntN(n)), int32(rng.IntN(n))
			if k := [2]int32{min(a, b), max(a, b)}; a != b && !seen[k] {
				seen[k] = true
				d.touch(a, b, rng.Float64())
			}
		}
		c := d.done()
		tr := c.bonds()
		for _, w := range c.weak() {
			places++
			below := make([]bool, n)
			size := 0
			for _, v := range tr.order {
				below[v] = v == w.below || tr.parent[v] != none && below[tr.parent[v]]
				if below[v] {
					size++
				}
			}
			contacts, odds, most := 0, 0.0, 0.0
			for k, e := range c.edges {
				if below[e.A] != below[e.B] {
					contacts++
					odds += float64(e.Capacity) * cut.Unit
					most += against(c.Contacts[k])
				}
			}
			if contacts != w.contacts || size != w.supervoxels[0] || math.Abs(odds-w.odds) > 1e-9 || w.against > most+1e-9 {
				t.Fatalf("%+v; counted %d contacts, %v, %v, %d supervoxels", w, contacts, odds, most, size)
			}
		}
	}
	if places < 50 {
		t.Errorf("only %d weak places in all", places)
	}
}

// TestTheTreeIsOneAndTheSame holds the tree's properties (METHODS of TEASAR on supervoxels): one edge less than nodes, and no
// dependence on the order of contacts.
func TestTheTreeIsOneAndTheSame(t *testing.T) {
	d := new(drawing)
	ring := d.neurite(20, base.Point{}, base.Point{1, 0, 0}, 100)
	for i, v := range ring { // bent into a circle
		x := 2 * math.Pi * float64(i) / 20
		d.v.Points[v] = base.Point{1000 * math.Cos(x), 1000 * math.Sin(x), 0}
	}
	d.touch(ring[19], ring[0], 0.98)
	tr := d.done().tree()
	edges := 0
	for _, p := range tr.parent {
		if p != none {
			edges++
		}
	}
	if edges != 19 || len(tr.order) != 20 {
		t.Errorf("%d edges among 20 supervoxels", edges)
	}
}
