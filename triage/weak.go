package triage

import (
	"math"
	"slices"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/ledger/cut"
)

// weakPlace is a place where little holds a segment together: the cut between a supervoxel's subtree and the rest, in the tree of
// the firmest contacts. Every bridge is one, and so is a false merge, because that tree crosses it once.
type weakPlace struct {
	below, above int32        // the tree edge: child and parent
	contacts     int          // that cross
	odds         float64      // what cutting them costs: log-odds, never less than a unit each
	against      float64      // what those of them nearby say against one cell, log-odds
	mine, theirs []base.Point // directions in which the two sides go on from here
	// What is on the side of the subtree, and on the other.
	supervoxels [2]int
	voxels      [2]float64
	in, out     [2]int // confident synapses
	synapses    [2]int // all
	nuclei      [2]int
	cable       [2]float64 // nm
	strongest   float64    // affinity of the strongest contact that crosses
}

const (
	// weakPrior is the log-odds that a weak place is sound, before its contacts are heard: 20 to 1, our own prior. Real necks are
	// thin, and far more numerous than false merges.
	weakPrior = 3.0
	// temper divides the log-odds of the contacts that speak against one cell, because those of the same two bodies err together;
	// againstMost bounds what they say in all.
	temper, againstMost = 2.0, 6.0
	// againstNM is how near to the place they must be: elsewhere, parts of one cell touch in passing and say the same.
	againstNM = 2000.0
	// beliefMost bounds what one contact may say, in log-odds: 99 to 1.
	beliefMost = 4.6
	// How many times likelier it is at a false merge than at a sound weak place that both sides go on in two directions or more,
	// as two neurites do that touch in passing; and that each goes on in one, as a single neurite does. Our own estimates.
	passingRatio, seriesRatio = 6.0, 0.4
)

// probability that the two sides are two cells, from what the contacts between them say and how the two lie. Two neurites that
// touch in passing have many contacts, and all but one or two of them speak against one cell; a thin neck has one, for it.
func (w *weakPlace) probability() float64 { return w.given(1) }

// given is the probability in the light of further evidence, which is so many times likelier at a false merge than elsewhere.
func (w *weakPlace) given(ratio float64) float64 {
	switch {
	case len(w.mine) >= 2 && len(w.theirs) >= 2:
		ratio *= passingRatio
	case len(w.mine) <= 1 && len(w.theirs) <= 1:
		ratio *= seriesRatio
	}
	return 1 / (1 + math.Exp(weakPrior+w.odds-min(w.against/temper, againstMost))/ratio)
}

// against is what a contact says against one cell, in log-odds: nothing when it speaks for it, or nobody looked.
func against(c base.Contact) float64 {
	if c.Link || c.Assumed {
		return 0
	}
	p := min(max(c.Affinity, 1e-6), 1-1e-6)
	return min(max(0, math.Log((1-p)/p)), beliefMost)
}

// smaller is which side has fewer voxels.
func (w *weakPlace) smaller() int {
	if w.voxels[0] <= w.voxels[1] {
		return 0
	}
	return 1
}

// moved is the worth of the side that a correction would take away.
func (c *Case) moved(w *weakPlace) float64 {
	s := w.smaller()
	return c.worth(w.synapses[s], w.cable[s])
}

const (
	// weakOdds is the most that may hold a weak place together, in log-odds: beyond it no other sign would make up for it.
	weakOdds = 6.0
	// weakLeast is the fewest supervoxels a side must have: twigs of fewer are not worth a look of their own.
	weakLeast = 4
)

// findWeak weighs the cut at every edge of the tree and keeps the weak ones. A contact outside the tree crosses exactly the
// edges on the tree's way between its ends, so adding it at both ends and taking it off twice at their meeting point gives
// every cut's weight as a subtree sum (the 1-respecting cuts of Karger 2000, J. ACM 47:46). O((n + m) log n).
func findWeak(c *Case) []weakPlace {
	t := c.bonds()
	n := c.Len()
	odds, crossing := make([]float64, n), make([]float64, n)
	meet := newMeeting(t)
	for k, contact := range c.Contacts {
		a, b := contact.A, contact.B
		weight := float64(c.edges[k].Capacity) * cut.Unit
		top := meet.of(a, b)
		if top == none {
			continue
		}
		odds[a] += weight
		odds[b] += weight
		odds[top] -= 2 * weight // which may be one of the two
		crossing[a]++
		crossing[b]++
		crossing[top] -= 2
	}
	at := func(x []float64) func(int32) float64 { return func(i int32) float64 { return x[i] } }
	sumOdds, sumCrossing := t.sums(at(odds)), t.sums(at(crossing))
	side, below := c.sides(), t.intervals()
	var out []weakPlace
	for v := range int32(n) {
		if t.parent[v] == none || sumOdds[v] > weakOdds {
			continue
		}
		w := side.place(v, t.parent[v])
		w.odds, w.contacts = max(0, sumOdds[v]), int(math.Round(sumCrossing[v]))
		if min(w.supervoxels[0], w.supervoxels[1]) < weakLeast {
			continue
		}
		w.strongest = c.strongest(v, t.parent[v])
		w.mine, w.theirs = c.arms(v, t.parent[v]), c.arms(t.parent[v], v)
		w.against = c.againstNear(&w, below)
		out = append(out, w)
	}
	return out
}

// againstNear adds up what contacts near a weak place say against one cell, of those that cross it.
func (c *Case) againstNear(w *weakPlace, below *intervals) float64 {
	middle := c.between(w.below, w.above)
	seen := map[int32]bool{w.below: true, w.above: true}
	queue := []int32{w.below, w.above}
	var sum float64
	for len(queue) > 0 {
		v := queue[0]
		queue = queue[1:]
		inside := below.holds(w.below, v)
		for _, a := range c.at(v) {
			k := c.Contacts[a.Contact]
			if inside && !below.holds(w.below, a.To) { // counted from the inside, once
				sum += against(k)
			}
			if !seen[a.To] && c.Points[a.To].Distance(middle) <= againstNM {
				seen[a.To] = true
				queue = append(queue, a.To)
			}
		}
	}
	return sum
}

// strongest is the affinity of the contact at a tree edge.
func (c *Case) strongest(a, b int32) float64 {
	p := 0.0
	for _, arc := range c.at(a) {
		if arc.To == b {
			p = max(p, c.Contacts[arc.Contact].Affinity)
		}
	}
	return p
}

// sides are what lies below each supervoxel of the tree, and in all.
type sides struct {
	supervoxels, voxels, in, out, synapses, nuclei, cable []float64
	all                                                   [7]float64
}

func (c *Case) sides() *sides {
	t := c.bonds()
	n := c.Len()
	in, out, every, nuclei := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
	for _, s := range c.Synapses {
		every[s.At]++
		if s.Confidence < confident {
			continue
		}
		if s.Out {
			out[s.At]++
		} else {
			in[s.At]++
		}
	}
	for _, k := range c.Nuclei {
		nuclei[k.At]++
	}
	at := func(x []float64) func(int32) float64 { return func(i int32) float64 { return x[i] } }
	s := &sides{
		supervoxels: t.sums(func(int32) float64 { return 1 }),
		voxels:      t.sums(func(i int32) float64 { return float64(c.Voxels[i]) }),
		in:          t.sums(at(in)), out: t.sums(at(out)), synapses: t.sums(at(every)), nuclei: t.sums(at(nuclei)),
		cable: t.sums(func(i int32) float64 { return t.length[i] }),
	}
	for k, x := range [][]float64{s.supervoxels, s.voxels, s.in, s.out, s.synapses, s.nuclei, s.cable} {
		for v := range int32(n) {
			if t.parent[v] == none {
				s.all[k] += x[v]
			}
		}
	}
	return s
}

func (s *sides) place(v, parent int32) weakPlace {
	pair := func(k int, x []float64) [2]int { return [2]int{int(x[v]), int(s.all[k] - x[v])} }
	return weakPlace{
		below: v, above: parent,
		supervoxels: pair(0, s.supervoxels), in: pair(2, s.in), out: pair(3, s.out), synapses: pair(4, s.synapses), nuclei: pair(5, s.nuclei),
		voxels: [2]float64{s.voxels[v], s.all[1] - s.voxels[v]},
		cable:  [2]float64{s.cable[v], s.all[6] - s.cable[v]},
	}
}

const (
	// seedsWanted is how many seeds are proposed a side: in trials three recovered the true side more often than one.
	seedsWanted = 3
	// seedHops is how many steps away from the place the first seed is: next to it, a cheap cut close to the seed is taken.
	seedHops = 2
)

// propose offers seeds on both sides of a tree edge, some steps away from it.
func (c *Case) propose(w *weakPlace) *Proposal {
	return &Proposal{Kind: ProposeSplit, Groups: [][]ledger.ID{ids(c.View, c.seeds(w.below, w.above)), ids(c.View, c.seeds(w.above, w.below))}}
}

// seeds walks from a supervoxel over strong contacts, never over the tree edge to the one it must keep away from nor to the
// tree's other side, and takes the first few that are some steps away; the supervoxel itself when there is nothing else.
func (c *Case) seeds(from, not int32) []int32 {
	t := c.bonds()
	seen := map[int32]int{from: 0, not: -1}
	queue := []int32{from}
	var out []int32
	for len(queue) > 0 && len(out) < seedsWanted {
		v := queue[0]
		queue = queue[1:]
		if seen[v] >= seedHops {
			out = append(out, v)
		}
		next := slices.Clone(t.twigs[v])
		if t.parent[v] != none {
			next = append(next, t.parent[v])
		}
		for _, k := range next {
			if _, was := seen[k]; !was {
				seen[k] = seen[v] + 1
				queue = append(queue, k)
			}
		}
	}
	if len(out) == 0 {
		out = append(out, from)
	}
	return out
}
