package stats

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Z95 is the 0.975 quantile of the normal distribution: two-sided 95 % intervals.
const Z95 = 1.959963984540054

// Wilson is the score interval of a share of k in n, with z normal quantiles on either side. Absent when n is 0.
//
// Wilson 1927, J. Am. Stat. Assoc. 22:209.
func Wilson(k, n int, z float64) (lo, hi float64, ok bool) {
	if n <= 0 {
		return 0, 0, false
	}
	p, m, z2 := float64(k)/float64(n), float64(n), z*z
	middle := p + z2/(2*m)
	half := z * math.Sqrt(p*(1-p)/m+z2/(4*m*m))
	whole := 1 + z2/m
	lo, hi = max(0, (middle-half)/whole), min(1, (middle+half)/whole)
	switch k { // exact at the ends, where rounding is not
	case 0:
		lo = 0
	case n:
		hi = 1
	}
	return lo, hi, true
}

// ClopperPearson is the exact interval of a share of k in n: it covers the true one with at least the level's chance, so it is
// wider than Wilson's. Level 0.95 leaves out 2.5 % on either side. Absent when n is 0.
//
// Clopper & Pearson 1934, Biometrika 26:404.
func ClopperPearson(k, n int, level float64) (lo, hi float64, ok bool) {
	if n <= 0 {
		return 0, 0, false
	}
	out := (1 - level) / 2
	x, rest := float64(k), float64(n-k)
	if hi = 1; k < n {
		hi = distuv.Beta{Alpha: x + 1, Beta: rest}.Quantile(1 - out)
	}
	if k > 0 {
		lo = distuv.Beta{Alpha: x, Beta: rest + 1}.Quantile(out)
	}
	return lo, hi, true
}
