package triage

import (
	"cmp"
	"fmt"
	"slices"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
)

const (
	// contactLeast is the affinity below which a rejected contact is not worth a look of its own.
	contactLeast = 0.1
	// contactHalf is the affinity at which half of the rejected contacts are thought to be one cell. Our own prior, to be learned
	// from outcomes: agglomeration is cautious, so many a contact that it rejected is right all the same.
	contactHalf = 0.2
	// contactMost bounds the findings of one segment.
	contactMost = 40
)

const (
	// passing is how much likelier two cells are where a fragment is touched in passing and not at an end; our own prior.
	passing = 0.25
	// nucleated is how much likelier two cells are when both have a nucleus; our own prior.
	nucleated = 0.05
	// tiny is up to how many supervoxels a fragment is all ends.
	tiny = 6
)

// fit weighs a neighbour by what the two segments are: a neurite goes on at its ends, and a cell has one nucleus.
func (c *Case) fit(n neighbour) float64 {
	f := 1.0
	if _, atTip := c.tips()[n.strongest.At]; !atTip && c.Len() > tiny {
		f *= passing
	}
	if other, ok := c.Other(n.segment); ok && other.Nuclei > 0 && len(c.Nuclei) > 0 {
		f *= nucleated
	}
	return f
}

func contactProbability(affinity float64) float64 { return affinity / (affinity + contactHalf) }

// strongContact reports the strongest rejected contact to each neighbouring segment.
var strongContact = Detector{
	Name: "strong-contact", Family: "contact", Kind: FalseSplit,
	Says: "a contact to another segment that the agglomeration rejected, with a high affinity",
	judge: func(c *Case) []Finding {
		var out []Finding
		for _, n := range c.neighbours() {
			if n.strongest.Affinity < contactLeast {
				continue
			}
			p := contactProbability(n.strongest.Affinity) * c.fit(n)
			out = append(out, c.joining(n, c.Points[n.strongest.At], p,
				fmt.Sprintf("a rejected contact of affinity %.2f to segment %d", n.strongest.Affinity, uint64(n.segment)),
				Evidence{"affinity", n.strongest.Affinity, ""},
				Evidence{"rejected contacts between the two", float64(n.contacts), ""},
				Evidence{"touching area", n.strongest.Area, "nm²"}))
		}
		return best(out, contactMost)
	},
}

// neighbour is another segment that touches this one without having been accepted.
type neighbour struct {
	segment   ledger.ID
	strongest base.Outside
	contacts  int
}

// judges says whether this segment is the one of two from which a contact between them is judged: the smaller, because it is
// the fragment, and its ends are what counts.
func (c *Case) judges(other ledger.ID) bool {
	o, ok := c.Other(other)
	if !ok {
		return true
	}
	own := ledger.Segment{ID: c.Segment}
	own.Supervoxels = int64(c.Len())
	return smaller(own, o).ID == c.Segment
}

// neighbours lists the segments that rejected contacts lead to and that are judged from here, each with its strongest.
// Contacts that a person cut are not among them.
func (c *Case) neighbours() []neighbour {
	at := make(map[ledger.ID]*neighbour)
	for _, o := range c.Outside {
		if o.Accepted || o.OtherSegment == c.Segment || !c.judges(o.OtherSegment) {
			continue
		}
		n, ok := at[o.OtherSegment]
		if !ok {
			at[o.OtherSegment] = &neighbour{o.OtherSegment, o, 1}
			continue
		}
		n.contacts++
		if c.stronger(o, n.strongest) {
			n.strongest = o
		}
	}
	out := make([]neighbour, 0, len(at))
	for _, n := range at {
		out = append(out, *n)
	}
	slices.SortFunc(out, func(a, b neighbour) int { return cmp.Compare(a.segment, b.segment) })
	return out
}

// stronger orders contacts so that both ends agree on the strongest.
func (c *Case) stronger(x, y base.Outside) bool {
	if x.Affinity != y.Affinity {
		return x.Affinity > y.Affinity
	}
	return pairKey(c.IDs[x.At], x.OtherID) < pairKey(c.IDs[y.At], y.OtherID)
}

// joining is a finding that proposes a merge. Its worth is that of the smaller of the two segments.
func (c *Case) joining(n neighbour, at base.Point, probability float64, said string, evidence ...Evidence) Finding {
	own := c.worth(len(c.Synapses), c.tree().cable)
	worth := own
	if other, ok := c.Other(n.segment); ok {
		step := typicalStep
		if c.Len() > 1 {
			step = c.tree().cable / float64(c.Len()-1)
		}
		worth = min(own, c.worth(int(other.SynapsesIn+other.SynapsesOut), step*float64(other.Supervoxels)))
		evidence = append(evidence, Evidence{"the smaller of the two", float64(min(int64(c.Len()), other.Supervoxels)), "supervoxels"})
	}
	a, b := c.IDs[n.strongest.At], n.strongest.OtherID
	if a > b {
		a, b = b, a
	}
	f := c.finding(pairKey(a, b), at, probability, worth, &Proposal{Kind: ProposeMerge, A: a, B: b}, said, evidence...)
	f.Segments = []ledger.ID{c.Segment, n.segment}
	slices.Sort(f.Segments)
	return f
}

// typicalStep is the distance of two supervoxels that touch, nm, when a segment is too small to tell.
const typicalStep = 500.0
