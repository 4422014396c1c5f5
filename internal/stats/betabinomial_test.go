package stats

import (
	"testing"
)

// Gelman et al., rat tumours with 4 of 14; book value of the mean recalled as 0.223, and Beta(5.4, 18.6) gives 0.225.
func TestPosterior(t *testing.T) {
	mean, lo, hi := Posterior(1.4, 8.6, 4, 14)
	near(t, "mean", mean, .225, 1e-12)
	near(t, "lower", lo, .08539618, 1e-7)
	near(t, "upper", hi, .4077899, 1e-7)
	mean, lo, hi = Posterior(2, 8, 9, 10)
	near(t, "mean", mean, .55, 1e-12)
	near(t, "lower", lo, .33499784, 1e-7)
	near(t, "upper", hi, .75552531, 1e-7)
}

// The 70 groups' rates have mean .136 and spread .103 in the book, and moments 1.4 and 8.6; more digits from R.
func TestPriorOfRatTumours(t *testing.T) {
	var rates []Rate
	for _, row := range checkFile(t, "rat_tumour_70.csv") {
		rates = append(rates, Rate{Hits: int(number(t, row[0])), Tries: int(number(t, row[1]))})
	}
	a, b, ok := Prior(append(rates, Rate{})) // a rate without tries says nothing
	if !ok {
		t.Fatal("no prior")
	}
	near(t, "a", a, 1.356149, 1e-6)
	near(t, "b", b, 8.615058, 1e-6)
	for name, r := range map[string][]Rate{"none": nil, "one": rates[:1], "alike": {{1, 2}, {2, 4}}, "all or nothing": {{0, 9}, {9, 9}}} {
		if _, _, ok := Prior(r); ok {
			t.Errorf("%s: nothing to learn a prior from", name)
		}
	}
}
