package stats

import (
	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Posterior is what k hits in n tries make of a belief Beta(a, b) about a rate: its mean, and the bounds that leave out 2.5 %
// on either side.
//
// Gelman et al., Bayesian Data Analysis, chapter 2.
func Posterior(a, b float64, k, n int) (mean, lo, hi float64) {
	d := distuv.Beta{Alpha: a + float64(k), Beta: b + float64(n-k)}
	return d.Mean(), d.Quantile(0.025), d.Quantile(0.975)
}

// Rate is k hits in n tries.
type Rate struct{ Hits, Tries int }

// Prior learns a belief Beta(a, b) about a new rate from those of others, by moments of the rates; those without tries say
// nothing. Absent when the rates don't differ, or differ more than any Beta's: then there is nothing to learn but their mean.
//
// Gelman et al., Bayesian Data Analysis, the rat tumour example.
func Prior(rates []Rate) (a, b float64, ok bool) {
	var p []float64
	for _, r := range rates {
		if r.Tries > 0 {
			p = append(p, float64(r.Hits)/float64(r.Tries))
		}
	}
	if len(p) < 2 {
		return 0, 0, false
	}
	mean, v := stat.MeanVariance(p, nil)
	if v == 0 || v >= mean*(1-mean) {
		return 0, 0, false
	}
	s := mean*(1-mean)/v - 1
	return mean * s, (1 - mean) * s, true
}
