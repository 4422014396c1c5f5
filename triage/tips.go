package triage

import (
	"fmt"
	"math"

	"fettle.example/fettle/ledger/base"
)

const (
	tipNM    = 1000.0 // nm: how long a twig must be to have a tip with a direction
	tipSteps = 2      // supervoxels from the tip in which a contact counts as being at it
	ahead    = 50.0   // degrees: what lies within is straight ahead
	nearSeam = 600.0  // nm: what is nearer to a seam or a gap is at it
	// Priors that something straight ahead of a blunt tip goes on with it, beyond what its contact says: our own.
	tipPrior     = 0.35
	tipSeamPrior = 0.6
	tipLeast     = 0.02 // affinity below which even a tip's contact is not reported
)

// facingTip reports tips that end in front of another segment: a neurite that goes on under another id. At seams and gaps,
// where the images jump, that is likelier.
var facingTip = Detector{
	Name: "facing-tip", Family: "tips", Kind: FalseSplit,
	Says: "a tip that ends in front of another segment, at a seam, a gap or elsewhere",
	judge: func(c *Case) []Finding {
		var out []Finding
		tips := c.tips()
		for _, n := range c.neighbours() {
			t, ok := tips[n.strongest.At]
			if !ok || n.strongest.Affinity < tipLeast {
				continue
			}
			there, ok := c.Place(n.strongest.Other)
			if !ok {
				continue
			}
			to, ok := direction(c.Points[t.tip], there)
			if !ok {
				continue
			}
			off := angle(t.outwards, to)
			if off > ahead {
				continue
			}
			where, distance := c.nearestPlane(c.Points[t.tip])
			prior, said := tipPrior, fmt.Sprintf("a tip ends in front of segment %d", uint64(n.segment))
			if distance <= nearSeam {
				prior, said = tipSeamPrior, said+" at a "+where
			}
			p := (1 - (1-prior)*(1-contactProbability(n.strongest.Affinity))) * c.fit(n)
			evidence := []Evidence{
				{"angle between the tip's direction and the other", off, "°"},
				{"distance to it", c.Points[t.tip].Distance(there), "nm"},
				{"affinity", n.strongest.Affinity, ""},
				{"length of the twig", t.length / 1000, "µm"},
			}
			if !math.IsInf(distance, 1) {
				evidence = append(evidence, Evidence{"distance to the nearest " + where, distance, "nm"})
			}
			out = append(out, c.joining(n, c.Points[t.tip], p, said, evidence...))
		}
		return best(out, contactMost)
	},
}

// tip is the end of a twig.
type tip struct {
	tip      int32
	outwards base.Point
	length   float64 // nm
}

// tips lists the ends of long twigs, the root among them when it is an end, by each supervoxel that is near one.
func (c *Case) findTips() map[int32]tip {
	t := c.tree()
	out := make(map[int32]tip)
	if c.Len() < 2 {
		return out
	}
	note := func(end, inner int32, length float64, next func(int32) int32) {
		u, ok := direction(c.Points[inner], c.Points[end])
		if !ok || length < tipNM {
			return
		}
		v := end
		for range tipSteps + 1 {
			if _, taken := out[v]; v == none || taken {
				break
			}
			out[v] = tip{end, u, length}
			v = next(v)
		}
	}
	for v := range int32(c.Len()) {
		if len(t.twigs[v]) == 0 && t.parent[v] != none {
			inner, came := t.inwards(v, tipNM)
			note(v, inner, came, func(k int32) int32 { return t.parent[k] })
		}
	}
	if len(t.twigs[t.root]) == 1 && len(c.Nuclei) == 0 {
		inner, came := t.outwards(t.root, tipNM)
		note(t.root, inner, came, t.onwards)
	}
	return out
}

// nearestPlane finds the seam or gap nearest to a point; the distance is infinite when the volume has none.
func (c *Case) nearestPlane(p base.Point) (what string, nm float64) {
	what, nm = "seam", math.Inf(1)
	for _, s := range c.Seams {
		if d := math.Abs(p[s.Axis] - s.AtNM); d < nm {
			what, nm = "seam", d
		}
	}
	for _, g := range c.Gaps {
		if d := max(0, g.FromNM-p[g.Axis], p[g.Axis]-g.ToNM); d < nm {
			what, nm = "gap", d
		}
	}
	return what, nm
}
