package triage

import (
	"fmt"
	"math"

	"fettle.example/fettle/internal/stats"
)

const (
	// sizeRatio is how many times likelier a weak place is a false merge in a segment of outlying size; sizePrior is how often such a
	// segment is one when it has no weak place. Both our own, to be learned from outcomes.
	sizeRatio = 3.0
	sizePrior = 0.05
)

// sizeOutlier reports segments far larger than the volume's others, on a logarithmic scale (Iglewicz & Hoaglin 1993; sizes
// are log-normal), and points at the weak place that would divide them best.
var sizeOutlier = Detector{
	Name: "size-outlier", Family: "size", Kind: FalseMerge,
	Says: "a segment far larger than others: modified z-score of ln voxels above 3.5",
	judge: func(c *Case) []Finding {
		if !c.SizesOK {
			return nil
		}
		voxels := c.voxels()
		z := c.Sizes.Z(math.Log(float64(voxels)))
		if z <= stats.Outlying {
			return nil
		}
		evidence := []Evidence{
			{"size", float64(voxels), "voxels"},
			{"modified z-score", z, ""},
			{"size beyond which it is outlying", math.Exp(c.Sizes.Cut(stats.Outlying)), "voxels"},
		}
		said := fmt.Sprintf("%.0f times the usual size", math.Exp(math.Log(float64(voxels))-c.Sizes.Median))
		var place *weakPlace
		for i := range c.weak() {
			if w := &c.weak()[i]; place == nil || w.probability()*c.moved(w) > place.probability()*c.moved(place) {
				place = w
			}
		}
		if place == nil {
			root := c.tree().root
			return []Finding{c.finding(fmt.Sprintf("size-%d", c.IDs[root]), c.Points[root], sizePrior, c.worth(len(c.Synapses)/2, c.tree().cable/2), nil,
				said+"; no weak place in it", evidence...)}
		}
		evidence = append(evidence, Evidence{"what contacts at its weakest place say against one cell", place.against, "nat"})
		p := place.given(sizeRatio)
		return []Finding{c.finding(c.pairKey(place.below, place.above), c.between(place.below, place.above), p, c.moved(place), c.propose(place), said, evidence...)}
	},
}
