package synth

import "math"

// threshold is the affinity from which the invented agglomeration accepts a contact.
const threshold = 0.5

// firm draws the affinity of a contact along a branch: high, now and then doubtful, oftener where images jump.
func (t *tissue) firm(a, b int) float64 {
	u := t.rng.Float64()
	doubt := 0.03
	if t.crosses(a, b) != "" {
		doubt = 0.3
	}
	if t.rng.Float64() < doubt {
		return 0.55 + 0.25*u
	}
	return 1 - 0.2*u*u*u
}

// passing draws the affinity of two neurites that pass each other: low, now and then doubtful. Two of one cell look alike, so the
// model is less sure that they are apart.
func (t *tissue) passing(a, b int) float64 {
	if t.rng.Float64() < 0.01 {
		return t.between(0.15, 0.45)
	}
	usual := -4.4 // natural logarithm of the median
	if t.pieces[a].cell == t.pieces[b].cell {
		usual = -3
	}
	return min(0.45, math.Exp(usual+t.rng.NormFloat64()))
}
