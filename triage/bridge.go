package triage

import "fmt"

// bridgeMost bounds the findings of one segment: the best by gain.
const bridgeMost = 6

// bridgeLeast is the probability below which a weak place alone is not worth a look.
const bridgeLeast = 0.04

// weakBridge reports places where one or a few doubtful contacts hold two substantial parts together: one wrong step of the
// agglomeration glues two cells there. A bridge in the strict sense (Tarjan 1974, IPL 2:160) is the case of one contact.
var weakBridge = Detector{
	Name: "weak-bridge", Family: "bridge", Kind: FalseMerge,
	Says: "doubtful contacts hold two substantial parts together; probability from what all contacts between them say",
	judge: func(c *Case) []Finding {
		var out []Finding
		for i := range c.weak() {
			w := &c.weak()[i]
			p := w.probability()
			if p < bridgeLeast {
				continue
			}
			s := w.smaller()
			what := "contact holds"
			if w.contacts != 1 {
				what = fmt.Sprintf("%d contacts hold", w.contacts)
			} else {
				what = "one " + what
			}
			out = append(out, c.finding(c.pairKey(w.below, w.above), c.between(w.below, w.above), p, c.moved(w), c.propose(w),
				fmt.Sprintf("%s %d supervoxels to the rest", what, w.supervoxels[s]),
				Evidence{"contacts that cross", float64(w.contacts), ""},
				Evidence{"affinity of the one at the place", w.strongest, ""},
				Evidence{"what those nearby say against one cell", w.against, "nat"},
				Evidence{"cost of cutting them", w.odds, "nat"},
				Evidence{"ways on from it", float64(len(w.mine)), ""},
				Evidence{"and on the other side", float64(len(w.theirs)), ""},
				Evidence{"smaller side", float64(w.supervoxels[s]), "supervoxels"},
				Evidence{"smaller side", w.cable[s] / 1000, "µm"},
				Evidence{"synapses there", float64(w.synapses[s]), ""}))
		}
		return best(out, bridgeMost)
	},
}
