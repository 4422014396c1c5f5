package stats

import (
	"math"
	"slices"
)

// Quantile is the value below which a share p of a sample lies, by the rule (n+1)p that NIST and Weibull use (R's type 6), between
// neighbours in proportion. Absent for an empty sample; p is taken between 0 and 1.
func Quantile(x []float64, p float64) (q float64, ok bool) {
	n := len(x)
	if n == 0 {
		return 0, false
	}
	s := slices.Sorted(slices.Values(x))
	rank, part := math.Modf(float64(n+1) * min(1, max(0, p)))
	switch k := int(rank); {
	case k < 1:
		return s[0], true
	case k >= n:
		return s[n-1], true
	default:
		return s[k-1] + part*(s[k]-s[k-1]), true
	}
}

// Fences are the bounds beyond which a value is an outlier: mild beyond the inner, extreme beyond the outer ones.
type Fences struct{ OuterLow, InnerLow, InnerHigh, OuterHigh float64 }

// NewFences sets fences 1.5 and 3 interquartile ranges outside the quartiles. Absent for fewer than eight values, or when half of
// them are equal, so that there is no range.
//
// Tukey 1977, Exploratory Data Analysis; NIST/SEMATECH e-Handbook 7.1.6.
func NewFences(x []float64) (f Fences, ok bool) {
	const least = 8
	if len(x) < least {
		return f, false
	}
	q1, _ := Quantile(x, 0.25)
	q3, _ := Quantile(x, 0.75)
	between := q3 - q1
	if between <= 0 {
		return f, false
	}
	return Fences{q1 - 3*between, q1 - 1.5*between, q3 + 1.5*between, q3 + 3*between}, true
}
