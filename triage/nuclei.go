package triage

import (
	"cmp"
	"fmt"
	"slices"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/ledger/cut"
)

// nucleiPrior is how often two nuclei in one segment are two cells: cells with two nuclei are rare, and so are nuclei that
// were found twice. Our own prior.
const nucleiPrior = 0.9

// nucleiMost bounds the pairs that are worked out in one segment.
const nucleiMost = 8

// severalNuclei reports segments with more than one nucleus, and proposes to part each further nucleus from the first.
var severalNuclei = Detector{
	Name: "several-nuclei", Family: "nuclei", Kind: FalseMerge,
	Says: "more than one nucleus in one segment",
	judge: func(c *Case) []Finding {
		nuclei := slices.Clone(c.Nuclei)
		slices.SortFunc(nuclei, func(a, b base.Nucleus) int { return -cmp.Compare(a.VolumeNM3, b.VolumeNM3) })
		var out []Finding
		for _, other := range nuclei[min(1, len(nuclei)):min(nucleiMost, len(nuclei))] {
			if f, ok := c.partNuclei(nuclei[0], other, len(nuclei)); ok {
				out = append(out, f)
			}
		}
		return out
	},
}

func (c *Case) partNuclei(a, b base.Nucleus, n int) (Finding, bool) {
	if a.At == b.At {
		return Finding{}, false // nothing can be cut inside a supervoxel
	}
	first, second := c.around(a.At, b.At), c.around(b.At, a.At)
	res, err := cut.Min(c.Len(), c.edges, first, second)
	if err != nil || len(res.Cut) == 0 {
		return Finding{}, false
	}
	in := make([]bool, c.Len())
	for _, v := range res.Side {
		in[v] = true
	}
	synapses := 0
	for _, s := range c.Synapses {
		if in[s.At] {
			synapses++
		}
	}
	var cable float64
	for _, v := range res.Side {
		cable += c.tree().length[v]
	}
	at := c.between(c.Contacts[res.Cut[0]].A, c.Contacts[res.Cut[0]].B)
	return c.finding(fmt.Sprintf("nuclei-%d-%d", min(a.ID, b.ID), max(a.ID, b.ID)), at, nucleiPrior, c.worth(synapses, cable),
		&Proposal{Kind: ProposeSplit, Groups: [][]ledger.ID{ids(c.View, first), ids(c.View, second)}},
		fmt.Sprintf("%d nuclei in one segment", n),
		Evidence{"nuclei", float64(n), ""},
		Evidence{"distance of these two", a.Point.Distance(b.Point) / 1000, "µm"},
		Evidence{"contacts to cut", float64(len(res.Cut)), ""},
		Evidence{"cost of the cut", float64(res.Flow) * cut.Unit, "nat"},
		Evidence{"smaller side", float64(len(res.Side)), "supervoxels"}), true
}

// around is a supervoxel and up to two neighbours that hang on it most firmly, none of them the one to keep apart from.
func (c *Case) around(v, not int32) []int32 {
	arcs := slices.Clone(c.at(v))
	slices.SortStableFunc(arcs, func(a, b base.Arc) int {
		return -cmp.Compare(c.Contacts[a.Contact].Affinity, c.Contacts[b.Contact].Affinity)
	})
	out := []int32{v}
	for _, a := range arcs {
		shared := slices.ContainsFunc(c.at(a.To), func(x base.Arc) bool { return x.To == not })
		if a.To != not && !shared && len(out) < seedsWanted && !slices.Contains(out, a.To) {
			out = append(out, a.To)
		}
	}
	return out
}
