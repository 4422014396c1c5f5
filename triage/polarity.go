package triage

import (
	"fmt"

	"fettle.example/fettle/internal/stats"
)

const (
	polaritySynapses = 5    // on each side, at least
	polarityMixing   = 0.3  // segregation index that a cut must reach, at least
	polarityChance   = 1e-3 // Fisher's exact p, at most
	// polarityRatio is how many times likelier such a parting of roles is at a false merge than at a sound weak place. Our own
	// estimate: a segregated arbor is also simply a neuron.
	polarityRatio = 4.0
)

// polarityConflict reports weak places that part inputs from outputs: an axon glued to a dendrite. The split of roles is
// measured by the segregation index and the place by synapse flow centrality (Schneider-Mizell et al. 2016, eLife 5:e12059).
// High segregation alone is a normal neuron and is never reported.
var polarityConflict = Detector{
	Name: "polarity-conflict", Family: "polarity", Kind: FalseMerge,
	Says: "input and output synapses that a cut at a weak place would part",
	judge: func(c *Case) []Finding {
		var out []Finding
		for i := range c.weak() {
			w := &c.weak()[i]
			if w.in[0]+w.out[0] < polaritySynapses || w.in[1]+w.out[1] < polaritySynapses {
				continue
			}
			if opposite := (w.in[0] > w.out[0]) != (w.in[1] > w.out[1]); !opposite {
				continue
			}
			h, ok := stats.Segregation([2]int{w.in[0], w.out[0]}, [2]int{w.in[1], w.out[1]})
			chance := stats.FisherExact(w.in[0], w.out[0], w.in[1], w.out[1])
			if !ok || h < polarityMixing || chance > polarityChance {
				continue
			}
			p := w.given(polarityRatio)
			flow := newFlow(int64(w.in[0]), int64(w.out[0]), int64(w.in[0]+w.in[1]), int64(w.out[0]+w.out[1]))
			out = append(out, c.finding(c.pairKey(w.below, w.above), c.between(w.below, w.above), p, c.moved(w), c.propose(w),
				fmt.Sprintf("a part with %d inputs and %d outputs hangs on one with %d and %d", w.in[0], w.out[0], w.in[1], w.out[1]),
				Evidence{"segregation index of this cut", h, ""},
				Evidence{"Fisher's exact p", chance, ""},
				Evidence{"synapse flow centrality", float64(flow.sum()), "paths"},
				Evidence{"inputs on the smaller side", float64(w.in[w.smaller()]), ""},
				Evidence{"outputs on the smaller side", float64(w.out[w.smaller()]), ""},
				Evidence{"what contacts nearby say against one cell", w.against, "nat"}))
		}
		return best(out, bridgeMost)
	},
}

// flow is the synapse flow centrality of a tree edge: how many ways from an input to an output lead over it, away from the
// root (proximal inputs to distal outputs) and towards it.
type flow struct{ centrifugal, centripetal int64 }

// newFlow counts from the inputs and outputs at or below an edge, and all of them.
func newFlow(below, belowOut, all, allOut int64) flow {
	return flow{centrifugal: (all - below) * belowOut, centripetal: below * (allOut - belowOut)}
}

func (f flow) sum() int64 { return f.centrifugal + f.centripetal }
