package stats

import (
	"cmp"
	"slices"
)

// Duration is one observed time: how long something took, or, when it had not ended, how long it had gone on at least.
type Duration struct {
	Time  float64
	Ended bool // false: censored
}

// Survival is the Kaplan-Meier estimate: the share that still goes on after each time at which something ended.
type Survival struct {
	Steps    []SurvivalStep
	N        int
	Censored int
	longest  float64
}

// SurvivalStep is the estimate after a time.
type SurvivalStep struct{ Time, Share float64 }

// KaplanMeier estimates how long things take when some were broken off. Leaving those out would bias the median down,
// because long ones are the ones that are given up. At a tie, ends come before censorings.
//
// Kaplan & Meier 1958, J. Am. Stat. Assoc. 53:457-481.
func KaplanMeier(times []Duration) Survival {
	sorted := slices.Clone(times)
	slices.SortFunc(sorted, func(a, b Duration) int { return cmp.Compare(a.Time, b.Time) })
	s := Survival{N: len(sorted)}
	share := 1.0
	for i := 0; i < len(sorted); {
		at, risk, ended := sorted[i].Time, len(sorted)-i, 0
		for ; i < len(sorted) && sorted[i].Time == at; i++ {
			if sorted[i].Ended {
				ended++
			} else {
				s.Censored++
			}
		}
		if ended > 0 {
			share *= 1 - float64(ended)/float64(risk)
			s.Steps = append(s.Steps, SurvivalStep{at, share})
		}
		s.longest = at
	}
	return s
}

// Median is the time at which the share falls below one half; where it is one half exactly, the middle of that stretch (R's
// rule, which gives the sample's median when nothing is censored). Absent when the share never falls that low.
func (s Survival) Median() (float64, bool) {
	const close = 1e-9 // products of fractions that ought to be one half
	for i, step := range s.Steps {
		switch {
		case step.Share < 0.5-close:
			return step.Time, true
		case step.Share <= 0.5+close:
			if i+1 < len(s.Steps) {
				return (step.Time + s.Steps[i+1].Time) / 2, true
			}
			return (step.Time + s.longest) / 2, true
		}
	}
	return 0, false
}

// At is the share that goes on beyond a time.
func (s Survival) At(t float64) float64 {
	share := 1.0
	for _, step := range s.Steps {
		if step.Time > t {
			break
		}
		share = step.Share
	}
	return share
}
