package tasks

import (
	"cmp"
	"slices"

	"github.com/google/uuid"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

// live is an open or claimed task that the news concern.
type live struct {
	number   int64
	keys     []string // of the findings it was made of, its place's own first
	segments []ledger.ID
	priority float64
	lined    bool // open, and in the lines
	claim    *uuid.UUID
}

// moved is a live task and the place that it is about from now on.
type moved struct {
	live
	place triage.Place
}

// match finds the task of each place, the best place first: one in somebody's hands before others, then one that has
// the place's own key, then the oldest. What remains are tasks whose place is gone, and places without a task. A task
// that has nothing to change is in neither.
func match(found []live, places []triage.Place) (moving []moved, gone []live, rest []triage.Place) {
	byKey := make(map[string][]int)
	for i, t := range found {
		for _, key := range t.keys {
			byKey[key] = append(byKey[key], i)
		}
	}
	taken := make([]bool, len(found))
	for _, p := range places {
		best := -1
		for _, key := range keysOf(p) {
			for _, i := range byKey[key] {
				if !taken[i] && (best < 0 || closer(found[i], found[best], p)) {
					best = i
				}
			}
		}
		if best < 0 {
			rest = append(rest, p)
			continue
		}
		taken[best] = true
		if t := found[best]; p.Priority != t.priority || p.Key != t.keys[0] || !slices.Equal(p.Segments, t.segments) {
			moving = append(moving, moved{t, p})
		}
	}
	for i, t := range found {
		if !taken[i] {
			gone = append(gone, t)
		}
	}
	slices.SortFunc(moving, func(a, b moved) int { return cmp.Compare(a.number, b.number) })
	return moving, gone, rest
}

func closer(a, b live, p triage.Place) bool {
	switch {
	case (a.claim != nil) != (b.claim != nil):
		return a.claim != nil
	case (a.keys[0] == p.Key) != (b.keys[0] == p.Key):
		return a.keys[0] == p.Key
	}
	return a.number < b.number
}
