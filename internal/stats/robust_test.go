package stats

import (
	"math"
	"strconv"
	"testing"
)

// R 4.2.2 mad and SciPy 1.10.1 agree on the first sample; the second is worked by hand (MAD 0, mean deviation 5/9).
func TestModifiedZ(t *testing.T) {
	x := []float64{2.1, 2.4, 2.2, 2.3, 2.5, 2.2, 2.6, 2.4, 2.3, 7.9, 2.2, 0.1}
	want := []float64{-1.349, 0.6745, -0.6745, 0, 1.349, -0.6745, 2.0235, 0.6745, 0, 37.772, -0.6745, -14.839}
	r, ok := NewRobust(x)
	if !ok || math.Abs(r.Median-2.3) > 1e-12 {
		t.Fatal(r, ok)
	}
	for i := range x {
		near(t, "z of "+strconv.FormatFloat(x[i], 'g', -1, 64), r.Z(x[i]), want[i], 1e-9)
	}
	same, ok := NewRobust([]float64{5, 5, 5, 5, 5, 5, 5, 6, 9})
	if !ok {
		t.Fatal("a sample with two that differ is scored")
	}
	near(t, "6", same.Z(6), 1.436192, 1e-6)
	near(t, "9", same.Z(9), 5.744769, 1e-6)
	if _, ok := NewRobust([]float64{1, 1, 1, 1, 1}); ok {
		t.Error("equal values have no score")
	}
	if _, ok := NewRobust([]float64{1, 2, 3, 4}); ok {
		t.Error("four values have no score")
	}
}

// SciPy 1.10.1.
func TestModifiedZOfSizes(t *testing.T) {
	x := []float64{120, 340, 95, 410, 880, 150, 230, 60, 1900, 305, 77000}
	want := []float64{-0.6745, 0.07855, -0.84342, 0.21392, 0.76618, -0.51315, -0.20408, -1.1757, 1.32272, 0, 3.99951}
	r, left, ok := NewLogRobust(append([]float64{0, -3}, x...))
	if !ok || left != 2 {
		t.Fatal(r, left, ok)
	}
	near(t, "median", r.Median, 5.720311776607412, 1e-12)
	near(t, "MAD", r.Unit*0.6745, 0.932820033825366, 1e-12)
	for i := range x {
		near(t, "z", r.Z(math.Log(x[i])), want[i], 1e-5)
	}
	if z := r.Z(r.Cut(Outlying)); math.Abs(z-Outlying) > 1e-12 {
		t.Errorf("the cut's z is %v", z)
	}
}
