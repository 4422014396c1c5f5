package stats

import (
	"cmp"
	"math"
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

// SurvivalStep is the estimate after a time, with how many had not ended before it and how many ended at it.
type SurvivalStep struct {
	Time, Share   float64
	StandardError float64 // of the share, by Greenwood's formula
	AtRisk, Ended int
}

// KaplanMeier estimates how long things take when some were broken off. Leaving those out would bias the median down,
// because long ones are the ones that are given up. At a tie, ends come before censorings.
//
// Kaplan & Meier 1958, J. Am. Stat. Assoc. 53:457-481.
func KaplanMeier(times []Duration) Survival {
	sorted := slices.Clone(times)
	slices.SortFunc(sorted, func(a, b Duration) int { return cmp.Compare(a.Time, b.Time) })
	s := Survival{N: len(sorted)}
	share, greenwood := 1.0, 0.0
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
			step := SurvivalStep{Time: at, Share: share, AtRisk: risk, Ended: ended}
			if risk > ended { // at a share of 0 there is no error to state
				greenwood += float64(ended) / (float64(risk) * float64(risk-ended))
				step.StandardError = share * math.Sqrt(greenwood)
			}
			s.Steps = append(s.Steps, step)
		}
		s.longest = at
	}
	return s
}

// Median is the time at which the share falls below one half; where it is one half exactly, the middle of that stretch (R's
// rule, which gives the sample's median when nothing is censored). Absent when the share never falls that low.
func (s Survival) Median() (float64, bool) {
	return s.reaches(func(step SurvivalStep) float64 { return step.Share })
}

// MedianInterval is where the bounds of the share, z standard errors of its logarithm away, fall below one half: the median's
// interval by Brookmeyer and Crowley (1982, Biometrics 38:29-41), as R's survfit gives it. Either end may be absent; an absent
// upper one means that the data end too early to tell.
func (s Survival) MedianInterval(z float64) (lo, hi float64, okLo, okHi bool) {
	bound := func(z float64) func(SurvivalStep) float64 {
		return func(step SurvivalStep) float64 {
			if step.Share == 0 {
				return 0
			}
			return min(1, step.Share*math.Exp(z*step.StandardError/step.Share))
		}
	}
	lo, okLo = s.reaches(bound(-z))
	hi, okHi = s.reaches(func(step SurvivalStep) float64 {
		if step.Share == 0 {
			return 1 // R gives no bound there
		}
		return bound(z)(step)
	})
	return lo, hi, okLo, okHi
}

// RestrictedMean is the mean time up to a limit, the area under the curve, with its standard error (as R's survfit gives it).
// It is defined where the median is not. Absent without observations, and beyond the longest one when that had not ended.
func (s Survival) RestrictedMean(limit float64) (mean, standardError float64, ok bool) {
	if s.N == 0 || limit > s.longest && s.At(limit) > 0 {
		return 0, 0, false
	}
	area := make([]float64, len(s.Steps)+1) // under the curve from each step's time to the limit
	next := limit
	for i := len(s.Steps) - 1; i >= 0; i-- {
		if s.Steps[i].Time < limit {
			area[i] = area[i+1] + s.Steps[i].Share*(next-s.Steps[i].Time)
			next = s.Steps[i].Time
		}
	}
	var v float64
	for i, step := range s.Steps {
		if rest := step.AtRisk - step.Ended; rest > 0 {
			v += area[i] * area[i] * float64(step.Ended) / (float64(step.AtRisk) * float64(rest))
		}
	}
	return area[0] + next, math.Sqrt(v), true
}

// reaches finds where a falling curve over the steps passes one half.
func (s Survival) reaches(height func(SurvivalStep) float64) (float64, bool) {
	const close = 1e-9 // products of fractions that ought to be one half
	for i, step := range s.Steps {
		switch h := height(step); {
		case h < 0.5-close:
			return step.Time, true
		case h <= 0.5+close:
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
