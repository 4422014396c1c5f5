package triage

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"sync"

	"fettle.example/fettle/internal/stats"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/ledger/cut"
)

// Case is what a detector sees: one segment loaded whole, and what the volume's segments are like.
type Case struct {
	*base.View
	Sizes   stats.Robust // natural logarithms of voxel counts of the volume's segments of some size
	SizesOK bool
	Other   func(ledger.ID) (ledger.Segment, bool)  // what is known of another current segment
	Place   func(ordinal uint32) (base.Point, bool) // where a supervoxel of another segment is

	start []int32
	arcs  []base.Arc
	edges []cut.Edge
	tree  func() *tree // its shape
	bonds func() *tree // its firmest contacts
	weak  func() []weakPlace
	tips  func() map[int32]tip
}

// NewCase prepares a segment. What several detectors need is computed when the first asks for it.
func NewCase(w *base.View, sizes stats.Robust, sizesOK bool) *Case {
	c := &Case{View: w, Sizes: sizes, SizesOK: sizesOK, edges: ledger.Edgelist(w),
		Other: func(ledger.ID) (ledger.Segment, bool) { return ledger.Segment{}, false },
		Place: func(uint32) (base.Point, bool) { return base.Point{}, false },
	}
	c.start, c.arcs = w.Adjacency()
	c.tree = sync.OnceValue(func() *tree { return growTree(c) })
	c.bonds = sync.OnceValue(func() *tree { return growBonds(c) })
	c.weak = sync.OnceValue(func() []weakPlace { return findWeak(c) })
	c.tips = sync.OnceValue(c.findTips)
	return c
}

func (c *Case) at(i int32) []base.Arc { return c.arcs[c.start[i]:c.start[i+1]] }

// voxels is the segment's size.
func (c *Case) voxels() int64 {
	var n int64
	for _, v := range c.Voxels {
		n += v
	}
	return n
}

// between is the point halfway between two supervoxels, nm.
func (c *Case) between(a, b int32) base.Point {
	var p base.Point
	for i := range p {
		p[i] = (c.Points[a][i] + c.Points[b][i]) / 2
	}
	return p
}

// confident is the lowest confidence of a synapse that counts (METHODS: half).
const confident = 0.5

// certaintyCap keeps probabilities away from certainty, which evidence of this kind never gives.
const certaintyCap = 0.97

// finding fills in what all findings of a detector share.
func (c *Case) finding(key string, at base.Point, probability, moves float64, p *Proposal, said string, evidence ...Evidence) Finding {
	probability = min(probability, certaintyCap)
	return Finding{Key: key, Segments: []ledger.ID{c.Segment}, Point: at, Evidence: evidence, Said: said,
		Probability: probability, Moves: moves, Gain: probability * moves, Proposal: p}
}

// pairKey names a place by two supervoxels.
func (c *Case) pairKey(a, b int32) string { return pairKey(c.IDs[a], c.IDs[b]) }

func pairKey(a, b ledger.ID) string {
	if a > b {
		a, b = b, a
	}
	return fmt.Sprintf("%d-%d", a, b)
}

// synapseless is how many synapses a micrometre of cable stands for where none were found: so that a wrong piece without
// synapses is still worth a look. Our own prior: a tenth of a usual density of one a micrometre.
const synapseless = 0.1

// worth is what moving some supervoxels would put right: their synapses, and a little for their length.
func (c *Case) worth(synapses int, cable float64) float64 {
	return float64(synapses) + synapseless*cable/1000
}

func ids(w *base.View, local []int32) []ledger.ID {
	out := make([]ledger.ID, len(local))
	for i, k := range local {
		out[i] = w.IDs[k]
	}
	slices.Sort(out)
	return slices.Compact(out)
}

// direction is the unit vector from a to b; ok is false when they coincide.
func direction(a, b base.Point) (u base.Point, ok bool) {
	var n float64
	for i := range u {
		u[i] = b[i] - a[i]
		n += u[i] * u[i]
	}
	if n == 0 {
		return u, false
	}
	n = math.Sqrt(n)
	for i := range u {
		u[i] /= n
	}
	return u, true
}

// angle is that between two vectors, in degrees. By atan2, because acos loses digits near 0 and 180.
func angle(u, v base.Point) float64 {
	x := base.Point{u[1]*v[2] - u[2]*v[1], u[2]*v[0] - u[0]*v[2], u[0]*v[1] - u[1]*v[0]}
	dot := u[0]*v[0] + u[1]*v[1] + u[2]*v[2]
	return math.Atan2(math.Sqrt(x[0]*x[0]+x[1]*x[1]+x[2]*x[2]), dot) * 180 / math.Pi
}

// best keeps the findings of most gain, ties by key, at most n.
func best(fs []Finding, n int) []Finding {
	slices.SortFunc(fs, func(a, b Finding) int { return cmp.Or(-cmp.Compare(a.Gain, b.Gain), cmp.Compare(a.Key, b.Key)) })
	return fs[:min(n, len(fs))]
}
