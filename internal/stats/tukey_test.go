package stats

import (
	"testing"
)

// NIST/SEMATECH e-Handbook 7.1.6 prints quartiles and fences of its 90 values.
func TestFencesOfNIST(t *testing.T) {
	var x []float64
	for _, row := range checkFile(t, "nist_boxplot_90.csv") {
		x = append(x, number(t, row[0]))
	}
	for p, want := range map[float64]float64{0.25: 429.75, 0.5: 559.5, 0.75: 742.25} {
		q, ok := Quantile(x, p)
		if !ok {
			t.Fatal(p)
		}
		near(t, "quartile", q, want, 1e-9)
	}
	f, ok := NewFences(x)
	if want := (Fences{-507.75, -39, 1211, 1679.75}); !ok || f != want {
		t.Errorf("%+v, want %+v", f, want)
	}
	mild := 0
	for _, v := range x {
		if v > f.InnerHigh && v <= f.OuterHigh {
			mild++
			near(t, "the mild outlier", v, 1441, 0)
		}
	}
	if mild != 1 {
		t.Errorf("%d mild outliers", mild)
	}
}

// R's type 6 and numpy's "weibull" agree; type 7 would give 3.25 and 7.75.
func TestQuantileRule(t *testing.T) {
	x := []float64{100, 1, 2, 3, 4, 5, 6, 7, 8, 9}
	for p, want := range map[float64]float64{0.25: 2.75, 0.75: 8.25, 0: 1, 1: 100, 0.01: 1} {
		q, ok := Quantile(x, p)
		if !ok {
			t.Fatal(p)
		}
		near(t, "quantile", q, want, 1e-12)
	}
	if _, ok := Quantile(nil, 0.5); ok {
		t.Error("nothing has no quantile")
	}
	if _, ok := NewFences(x[:7]); ok {
		t.Error("seven values have no fences")
	}
	if _, ok := NewFences([]float64{3, 3, 3, 3, 3, 3, 3, 9}); ok {
		t.Error("no range, no fences")
	}
}
