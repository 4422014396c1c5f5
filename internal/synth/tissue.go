package synth

import (
	"math"
	"math/rand/v2"
)

// tissue is a block of invented cells before it is cut into a delivery. Lengths are nm.
type tissue struct {
	rng    *rand.Rand
	shape  Shape
	size   point
	cells  []cell
	pieces []piece
	own    []joint // contacts inside one cell, along its branches
	touch  []joint // contacts of what merely passes by
	reach  []reach // twigs that grew to an axon
	grown  *near   // the pieces of the cell that grows
}

// cell is one neuron; debris has none.
type cell struct {
	centre      point // of the soma
	radius      float64
	first, last int // its pieces are pieces[first:last], twigs excepted
	transmitter string
}

// piece is a supervoxel in the making.
type piece struct {
	at     point
	radius float64
	length float64 // along the branch
	cell   int     // debris: -1
	parent int     // the piece it grew from; none: -1
	part   part
}

// part is what a piece is of.
type part byte

const (
	soma part = iota
	trunk
	dendrite
	axon
	twig // a short side branch of a dendrite that receives
	debris
)

// joint is a contact in the making, between two pieces.
type joint struct {
	a, b     int
	affinity float64
	area     float64
	place    int // the planted error it belongs to, 1…; 0: none
}

// reach is a twig's head and the axon piece it grew to.
type reach struct{ axon, head int }

func (t *tissue) add(p piece) int {
	t.pieces = append(t.pieces, p)
	t.grown.add(p.at, len(t.pieces)-1)
	return len(t.pieces) - 1
}

// join makes a contact along a branch.
func (t *tissue) join(a, b int) {
	r := min(t.pieces[a].radius, t.pieces[b].radius)
	t.own = append(t.own, joint{a: a, b: b, affinity: t.firm(a, b), area: math.Pi * r * r * (0.8 + 0.4*t.rng.Float64())})
}

// inside says whether a point lies in the block.
func (t *tissue) inside(p point) bool {
	for k := range p {
		if p[k] < 0 || p[k] > t.size[k] {
			return false
		}
	}
	return true
}

// crosses says what damaged plane lies between two pieces: "seam", "gap" or nothing.
func (t *tissue) crosses(a, b int) string {
	za, zb := t.pieces[a].at[2], t.pieces[b].at[2]
	for _, g := range t.shape.Gaps {
		if middle := (g.FromNM + g.ToNM) / 2; (za < middle) != (zb < middle) {
			return "gap"
		}
	}
	for _, s := range t.shape.Seams {
		if (za < s.AtNM) != (zb < s.AtNM) {
			return "seam"
		}
	}
	return ""
}

// point is a place or a direction.
type point [3]float64

func (p point) plus(q point, scale float64) point {
	return point{p[0] + scale*q[0], p[1] + scale*q[1], p[2] + scale*q[2]}
}

func (p point) norm() float64 { return math.Sqrt(p[0]*p[0] + p[1]*p[1] + p[2]*p[2]) }

func (p point) distance(q point) float64 { return p.plus(q, -1).norm() }

// towards is the direction from p to q.
func (p point) towards(q point) point { return q.plus(p, -1).unit() }

func (p point) unit() point {
	n := p.norm()
	if n == 0 {
		return point{1, 0, 0}
	}
	return point{p[0] / n, p[1] / n, p[2] / n}
}

// anyway is a random direction.
func (t *tissue) anyway() point {
	return point{t.rng.NormFloat64(), t.rng.NormFloat64(), t.rng.NormFloat64()}.unit()
}

// between draws a number evenly.
func (t *tissue) between(lo, hi float64) float64 { return lo + (hi-lo)*t.rng.Float64() }
