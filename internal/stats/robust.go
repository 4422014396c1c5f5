package stats

import (
	"math"
	"slices"
)

// Median is the middle value, or the mean of the two middle ones. Absent when there is none.
func Median(x []float64) (m float64, ok bool) {
	if len(x) == 0 {
		return 0, false
	}
	s := slices.Sorted(slices.Values(x))
	n := len(s)
	return (s[(n-1)/2] + s[n/2]) / 2, true
}

// Robust are a sample's median and spread, against which modified z-scores are taken.
type Robust struct {
	Median float64
	// Unit is the spread that counts as one: MAD/0.6745, or 1.253314 times the mean absolute deviation when more than half
	// of the values are equal, so that the MAD is 0.
	Unit float64
	N    int
}

const (
	// madToSigma is the 0.75 quantile of the normal distribution, rounded as Iglewicz and Hoaglin print it.
	madToSigma = 0.6745
	// meanToSigma is the square root of pi/2, rounded likewise: the fall-back that common statistics packages use.
	meanToSigma = 1.253314
	// robustLeast is the smallest sample that is scored.
	robustLeast = 5
	// Outlying is the modified z-score beyond which a value is called an outlier.
	Outlying = 3.5
)

// NewRobust summarises a sample. Absent for fewer than five values, or when all are equal.
//
// Iglewicz & Hoaglin 1993, How to Detect and Handle Outliers, ASQC vol. 16; NIST/SEMATECH e-Handbook 1.3.5.17.
func NewRobust(x []float64) (r Robust, ok bool) {
	if len(x) < robustLeast {
		return r, false
	}
	r.N = len(x)
	r.Median, _ = Median(x)
	deviations := make([]float64, len(x))
	var sum float64
	for i, v := range x {
		deviations[i] = math.Abs(v - r.Median)
		sum += deviations[i]
	}
	mad, _ := Median(deviations)
	if r.Unit = mad / madToSigma; mad == 0 {
		r.Unit = meanToSigma * sum / float64(len(x))
	}
	return r, r.Unit > 0
}

// Z is the modified z-score of a value.
func (r Robust) Z(x float64) float64 { return (x - r.Median) / r.Unit }

// Cut is the value whose modified z-score is z.
func (r Robust) Cut(z float64) float64 { return r.Median + z*r.Unit }

// NewLogRobust summarises the natural logarithms of sizes, whose right tail is normal for them (Limpert, Stahel & Abbt
// 2001, BioScience 51:341-352). Values that can't be logged are left out and counted.
func NewLogRobust(x []float64) (r Robust, left int, ok bool) {
	logs := make([]float64, 0, len(x))
	for _, v := range x {
		if v > 0 {
			logs = append(logs, math.Log(v))
		} else {
			left++
		}
	}
	r, ok = NewRobust(logs)
	return r, left, ok
}
