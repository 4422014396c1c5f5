package triage

import (
	"fmt"
	"math"
	"slices"

	"fettle.example/fettle/ledger/base"
)

const (
	contracted = 500.0  // nm: branch points closer than this count as one
	armNM      = 1000.0 // nm along an arm at which its direction is taken; nearer, coarse supervoxels zig-zag
	straight   = 150.0  // degrees: two arms at least this far apart go on through a place
	clearer    = 60.0   // degrees by which the best pairing must beat the next
	turning    = 120.0  // degrees: a daughter that deflects more than this turns back
	thicker    = 1.4    // times its parent's radius: a daughter that no neurite has
)

// How many times likelier each sign is at a false merge than at a sound weak place. Our own estimates, and so are the thresholds,
// for no published ones were found; to be learned from outcomes.
const (
	crossingRatio = 3.0
	turningRatio  = 4.0
	thickRatio    = 2.0
)

// crossing reports places where two neurites seem glued in an X: arms on either side of a weak place go straight on. Dendrites
// form predominantly binary trees (Vormberg et al. 2017, PLoS Comput. Biol. 13:e1005615), so four arms are rare.
var crossing = Detector{
	Name: "crossing", Family: "branching", Kind: FalseMerge,
	Says: "four arms at a weak place that pair up straight, two and two",
	judge: func(c *Case) []Finding {
		var out []Finding
		for i := range c.weak() {
			w := &c.weak()[i]
			if len(w.mine) < 2 || len(w.theirs) < 2 {
				continue
			}
			pairing, ok := bestPairing(append(slices.Clone(w.mine), w.theirs...))
			if !ok || !pairing.within(len(w.mine)) {
				continue
			}
			p := w.given(crossingRatio)
			out = append(out, c.finding(c.pairKey(w.below, w.above), c.between(w.below, w.above), p, c.moved(w), c.propose(w),
				fmt.Sprintf("two neurites seem to cross here: arms go straight on at %.0f° and %.0f°", pairing.first, pairing.second),
				Evidence{"angle of one pair of arms", pairing.first, "°"},
				Evidence{"angle of the other", pairing.second, "°"},
				Evidence{"next best pairing is worse by", pairing.margin, "°"},
				Evidence{"contacts between the pairs", float64(w.contacts), ""},
				Evidence{"what contacts nearby say against one cell", w.against, "nat"}))
		}
		return best(out, bridgeMost)
	},
}

// turningBack reports branches at weak places that leave against the direction of growth; daughters of bifurcations do not turn
// back (van Pelt & Uylings 2012, Front. Comput. Neurosci. 5:54).
var turningBack = Detector{
	Name: "turning-back", Family: "branching", Kind: FalseMerge,
	Says: "a branch at a weak place that turns back by more than 120°",
	judge: func(c *Case) []Finding {
		t := c.bonds()
		var out []Finding
		for i := range c.weak() {
			w := &c.weak()[i]
			from, came := t.inwards(w.above, armNM)
			to, went := t.outwards(w.below, armNM)
			if came < armNM || went < armNM {
				continue
			}
			in, ok1 := direction(c.Points[from], c.Points[w.above])
			on, ok2 := direction(c.Points[w.above], c.Points[to])
			turn := angle(in, on)
			if !ok1 || !ok2 || turn < turning {
				continue
			}
			p := w.given(turningRatio)
			out = append(out, c.finding(c.pairKey(w.below, w.above), c.between(w.below, w.above), p, c.moved(w), c.propose(w),
				fmt.Sprintf("a branch turns back by %.0f°", turn),
				Evidence{"deflection", turn, "°"},
				Evidence{"contacts at its base", float64(w.contacts), ""},
				Evidence{"what contacts nearby say against one cell", w.against, "nat"}))
		}
		return best(out, bridgeMost)
	},
}

// thickDaughter reports branches at weak places that are thicker than what they leave. Rall's 3/2 rule (Rall 1959, Exp.
// Neurol. 1:491) has no exponent for them; real neurons scatter widely, so it is a soft sign.
var thickDaughter = Detector{
	Name: "thick-daughter", Family: "branching", Kind: FalseMerge,
	Says: "a branch at a weak place that is much thicker than its parent",
	judge: func(c *Case) []Finding {
		t := c.bonds()
		var out []Finding
		for i := range c.weak() {
			w := &c.weak()[i]
			daughter, ok1 := c.calibre(w.below, t.onwards)
			parent, ok2 := c.calibre(w.above, func(v int32) int32 { return t.parent[v] })
			if !ok1 || !ok2 || daughter < thicker*parent {
				continue
			}
			p := w.given(thickRatio)
			out = append(out, c.finding(c.pairKey(w.below, w.above), c.between(w.below, w.above), p, c.moved(w), c.propose(w),
				fmt.Sprintf("a branch %.1f times as thick as what it leaves", daughter/parent),
				Evidence{"radius of the branch", daughter, "nm"},
				Evidence{"radius of its parent", parent, "nm"},
				Evidence{"Rall's ratio", math.Pow(daughter/parent, 1.5), ""},
				Evidence{"what contacts nearby say against one cell", w.against, "nat"}))
		}
		return best(out, bridgeMost)
	},
}

// calibre is the median radius over an arm's first micrometre and more; absent for arms of fewer than four supervoxels.
func (c *Case) calibre(v int32, next func(int32) int32) (float64, bool) {
	const wanted, least = 8, 4
	var radii []float64
	for ; v != none && len(radii) < wanted; v = next(v) {
		radii = append(radii, c.Radius[v])
	}
	if len(radii) < least {
		return 0, false
	}
	slices.Sort(radii)
	return radii[len(radii)/2], true
}

// arms lists the directions in which a supervoxel's side of a tree edge goes on: paths that leave its near neighbourhood and
// reach far enough.
func (c *Case) arms(at, not int32) []base.Point {
	t := c.bonds()
	type step struct {
		node, from int32
		came       float64
	}
	var out []base.Point
	queue := []step{{at, not, 0}}
	for len(queue) > 0 {
		s := queue[0]
		queue = queue[1:]
		visit := func(k int32, nm float64) {
			if k == s.from {
				return
			}
			if s.came+nm <= contracted {
				queue = append(queue, step{k, s.node, s.came + nm})
				return
			}
			var end int32
			var went float64
			if t.parent[s.node] == k {
				end, went = t.inwards(k, armNM)
			} else {
				end, went = t.outwards(k, armNM)
			}
			if u, ok := direction(c.Points[at], c.Points[end]); ok && s.came+nm+went >= armNM {
				out = append(out, u)
			}
		}
		for _, k := range t.twigs[s.node] {
			visit(k, t.length[k])
		}
		if p := t.parent[s.node]; p != none {
			visit(p, t.length[s.node])
		}
	}
	return out
}

// pairing is the best way to pair four of the arms at a place.
type pairing struct {
	arms                  [4]int // the first two are a pair, and the last two
	first, second, margin float64
}

// bestPairing finds the two disjoint pairs of arms that go most nearly straight on: least summed deviation from 180°. It holds
// when both are straight and the next pairing of the same four arms is clearly worse.
func bestPairing(arms []base.Point) (p pairing, ok bool) {
	best := math.Inf(1)
	for a := range arms {
		for b := a + 1; b < len(arms); b++ {
			for c := a + 1; c < len(arms); c++ {
				for d := c + 1; d < len(arms); d++ {
					if c == b || d == b {
						continue
					}
					one, two := angle(arms[a], arms[b]), angle(arms[c], arms[d])
					if cost := 360 - one - two; cost < best {
						best = cost
						p = pairing{arms: [4]int{a, b, c, d}, first: one, second: two}
					}
				}
			}
		}
	}
	if math.IsInf(best, 1) {
		return p, false
	}
	a, b, c, d := arms[p.arms[0]], arms[p.arms[1]], arms[p.arms[2]], arms[p.arms[3]]
	next := min(360-angle(a, c)-angle(b, d), 360-angle(a, d)-angle(b, c))
	p.margin = next - best
	return p, p.first >= straight && p.second >= straight && p.margin >= clearer
}

// within says whether each pair lies on one side, when the first n arms are those of one side.
func (p pairing) within(n int) bool {
	side := func(i int) bool { return p.arms[i] < n }
	return side(0) == side(1) && side(2) == side(3) && side(0) != side(2)
}
