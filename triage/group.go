package triage

import (
	"cmp"
	"slices"
	"strings"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
)

// Place is what findings say together about one place: one unit of human work.
type Place struct {
	Key         string
	Family      string
	Kind        string
	Segments    []ledger.ID
	Point       base.Point
	Findings    []Finding // the weightiest first
	Probability float64
	Gain        float64 // expected synapses put right
	Minutes     float64 // expected handling time
	Priority    float64 // gain per minute
	Proposal    *Proposal
	Said        string
}

// samePlace is how near two suspected false merges of one segment must be to be one unit of work, nm: a proofreader sees both
// in one look.
const samePlace = 1000.0

// Group makes places of findings: those that name the same pair of supervoxels, or that suspect the same kind of error in the
// same segments within a micrometre. The answer does not depend on the order of the findings. O(f log f + f x findings of the
// same segments).
func Group(findings []Finding) []Place {
	sorted := slices.Clone(findings)
	slices.SortFunc(sorted, byWorth)
	bySegments := make(map[string][]int) // of places
	var places []Place
	for _, f := range sorted {
		home := segmentsKey(f)
		at := -1
		for _, i := range bySegments[home] {
			if p := &places[i]; p.Findings[0].Key == f.Key || p.Point.Distance(f.Point) <= samePlace {
				at = i
				break
			}
		}
		if at < 0 {
			at = len(places)
			bySegments[home] = append(bySegments[home], at)
			places = append(places, Place{Key: f.Key, Family: f.Family, Kind: f.Kind, Segments: f.Segments, Point: f.Point, Said: f.Said})
		}
		places[at].Findings = append(places[at].Findings, f)
	}
	for i := range places {
		places[i].weigh()
	}
	slices.SortFunc(places, func(a, b Place) int {
		return cmp.Or(-cmp.Compare(a.Priority, b.Priority), cmp.Compare(a.Key, b.Key))
	})
	return unlike(places)
}

// unlike leaves only the first place of each key.
func unlike(places []Place) []Place {
	seen := make(map[string]bool, len(places))
	return slices.DeleteFunc(places, func(p Place) bool {
		was := seen[p.Key]
		seen[p.Key] = true
		return was
	})
}

func segmentsKey(f Finding) string {
	var b strings.Builder
	b.WriteString(f.Kind)
	for _, id := range f.Segments {
		b.WriteByte(' ')
		b.WriteString(id.String())
	}
	return b.String()
}

// weigh combines the findings of a place. Each detector starts from its own prior and from the same contacts, so they are not
// independent: the likeliest one counts fully, each further family half as far towards certainty as it would alone.
func (p *Place) weigh() {
	byFamily := make(map[string]float64)
	var moves float64
	for _, f := range p.Findings {
		byFamily[f.Family] = max(byFamily[f.Family], f.Probability)
		if p.Proposal == nil && f.Proposal != nil {
			p.Proposal = f.Proposal
		}
		moves = max(moves, f.Moves)
	}
	probabilities := make([]float64, 0, len(byFamily))
	for _, x := range byFamily {
		probabilities = append(probabilities, x)
	}
	slices.Sort(probabilities)
	slices.Reverse(probabilities)
	wrong := 1.0
	for i, x := range probabilities {
		if i > 0 {
			x /= 2
		}
		wrong *= 1 - x
	}
	p.Probability = min(1-wrong, certaintyCap)
	p.Gain = p.Probability * moves
	p.Minutes = minutesPrior[p.Kind]
	p.Priority = p.Gain / p.Minutes
}
