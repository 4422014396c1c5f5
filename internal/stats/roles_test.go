package stats

import (
	"testing"
)

// SciPy 1.10.1 fisher_exact, entropy; scikit-learn mutual_info_score.
func TestRoles(t *testing.T) {
	near(t, "Fisher", FisherExact(12, 1, 1, 8), 0.00023722407623336415, 1e-15)
	near(t, "Fisher of no difference", FisherExact(5, 5, 5, 5), 1, 1e-12)
	for _, c := range []struct {
		a, b [2]int
		want float64
	}{
		{[2]int{10, 1}, [2]int{1, 8}, 0.5284028597077273},
		{[2]int{100, 5}, [2]int{20, 75}, 0.4874258300164084},
		{[2]int{50, 0}, [2]int{0, 20}, 1},
		{[2]int{30, 10}, [2]int{15, 5}, 0},
	} {
		h, ok := Segregation(c.a, c.b)
		if !ok {
			t.Fatal(c)
		}
		near(t, "segregation", h, c.want, 1e-12)
	}
	if _, ok := Segregation([2]int{5, 0}, [2]int{7, 0}); ok {
		t.Error("inputs alone are not segregated, nor mixed")
	}
}
