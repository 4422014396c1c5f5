package stats

import "math"

// FisherExact is the two-sided p-value of a 2x2 table: the summed chance of all tables with the same margins that are no
// likelier than this one. Margins of up to some thousands.
//
// Fisher 1922; the two-sided rule is that of R and SciPy.
func FisherExact(a, b, c, d int) float64 {
	row, col, n := a+b, a+c, a+b+c+d
	logChoose := func(n, k int) float64 {
		x, _ := math.Lgamma(float64(n + 1))
		y, _ := math.Lgamma(float64(k + 1))
		z, _ := math.Lgamma(float64(n - k + 1))
		return x - y - z
	}
	chance := func(x int) float64 {
		return math.Exp(logChoose(row, x) + logChoose(n-row, col-x) - logChoose(n, col))
	}
	const slack = 1 + 1e-7 // for equal chances that rounding tells apart
	here, sum := chance(a)*slack, 0.0
	for x := max(0, col-(n-row)); x <= min(row, col); x++ {
		if p := chance(x); p <= here {
			sum += p
		}
	}
	return min(1, sum)
}

// Segregation is 1 minus the entropy of roles within clusters over that of the whole: 0 when inputs and outputs are mixed
// alike everywhere, 1 when each cluster has one role. Clusters are counts {inputs, outputs}. Absent when the whole has one
// role only.
//
// Schneider-Mizell et al. 2016, eLife 5:e12059, Methods.
func Segregation(clusters ...[2]int) (h float64, ok bool) {
	var whole [2]int
	var within, all float64
	for _, c := range clusters {
		n := float64(c[0] + c[1])
		whole[0], whole[1] = whole[0]+c[0], whole[1]+c[1]
		within += n * roleEntropy(c)
		all += n
	}
	s := roleEntropy(whole)
	if s == 0 {
		return 0, false
	}
	return max(0, 1-within/all/s), true
}

func roleEntropy(c [2]int) float64 {
	n := float64(c[0] + c[1])
	var s float64
	for _, k := range c {
		if k > 0 {
			p := float64(k) / n
			s -= p * math.Log(p)
		}
	}
	return s
}
