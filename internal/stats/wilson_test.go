package stats

import (
	"math"
	"testing"
)

// Newcombe 1998's examples, as R prop.test(correct=FALSE) and statsmodels give them.
func TestWilson(t *testing.T) {
	const z90 = 1.6448536269514722
	for _, c := range []struct {
		k, n      int
		z, lo, hi float64
	}{
		{81, 263, Z95, .255288519878, .366209576983},
		{15, 148, Z95, .0623863995307, .1604872417233},
		{0, 20, Z95, 0, .161125158053},
		{1, 29, Z95, .00611321429276, .17175521879320},
		{4, 20, z90, .0931180165812, .3783766858354},
	} {
		lo, hi, ok := Wilson(c.k, c.n, c.z)
		if !ok {
			t.Fatal(c)
		}
		near(t, "lower", lo, c.lo, 1e-11)
		near(t, "upper", hi, c.hi, 1e-11)
	}
	if _, hi, _ := Wilson(7, 7, Z95); hi != 1 {
		t.Errorf("all of seven: upper bound %v", hi)
	}
	if _, _, ok := Wilson(0, 0, Z95); ok {
		t.Error("none of none has no interval")
	}
}

// The exact intervals of the same examples: R binom.test and statsmodels.
func TestClopperPearson(t *testing.T) {
	for _, c := range []struct {
		k, n   int
		lo, hi float64
	}{
		{81, 263, .252736745585, .367621922601},
		{15, 148, .0578440100834, .1616504903495},
		{0, 20, 0, .168433470983},
		{1, 29, .00087264688358, .17764429548872},
	} {
		lo, hi, ok := ClopperPearson(c.k, c.n, 0.95)
		if !ok {
			t.Fatal(c)
		}
		near(t, "lower", lo, c.lo, 1e-10)
		near(t, "upper", hi, c.hi, 1e-10)
	}
	if lo, hi, _ := ClopperPearson(20, 20, 0.95); hi != 1 || math.Abs(lo-(1-.168433470983)) > 1e-10 {
		t.Errorf("all of twenty: %v to %v", lo, hi)
	}
	if _, _, ok := ClopperPearson(0, 0, 0.95); ok {
		t.Error("none of none has no interval")
	}
}
