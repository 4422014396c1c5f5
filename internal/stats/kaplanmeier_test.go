package stats

import (
	"testing"
)

// Freireich et al. 1963 as in R's MASS::gehan, estimated with R survival 3.5-3.
func TestKaplanMeierOnFreireich(t *testing.T) {
	arms := make(map[string][]Duration)
	for _, r := range checkFile(t, "freireich_gehan.csv") {
		arms[r[3]] = append(arms[r[3]], Duration{number(t, r[1]), r[2] == "1"})
	}
	s := KaplanMeier(arms["6-MP"])
	if s.N != 21 || s.Censored != 12 {
		t.Fatalf("%d of %d censored", s.Censored, s.N)
	}
	for at, want := range map[float64]float64{6: .857, 7: .807, 10: .753, 13: .690, 16: .627, 22: .538, 23: .448} {
		near(t, "S", s.At(at), want, 5e-4)
	}
	if m, ok := s.Median(); !ok || m != 23 {
		t.Errorf("median %v %v", m, ok)
	}
	near(t, "Greenwood's error at 6", s.Steps[0].StandardError, .0764, 5e-5)
	mean, _, ok := s.RestrictedMean(35)
	near(t, "mean to 35", mean, 23.287395, 1e-6)
	if _, _, beyond := s.RestrictedMean(36); !ok || beyond {
		t.Error("a mean is restricted to what was observed")
	}
	control := KaplanMeier(arms["control"])
	if m, ok := control.Median(); !ok || m != 8 {
		t.Errorf("median of control %v %v", m, ok)
	}
	mean, _, _ = control.RestrictedMean(35)
	near(t, "mean of control", mean, 8.666667, 1e-6)
	// R's survfit prints these 95 % bounds of the medians (recalled from memory): 16 to none, and 4 to 12.
	if lo, _, okLo, okHi := s.MedianInterval(Z95); !okLo || okHi || lo != 16 {
		t.Errorf("interval of the median: %v %v %v", lo, okLo, okHi)
	}
	if lo, hi, okLo, okHi := control.MedianInterval(Z95); !okLo || !okHi || lo != 4 || hi != 12 {
		t.Errorf("interval of control's median: %v %v, %v %v", lo, hi, okLo, okHi)
	}
}

// R survival and statsmodels agree on the second sample; the first is R's convention for an uncensored one.
func TestMedianHandlingTime(t *testing.T) {
	if m, _ := KaplanMeier([]Duration{{1, true}, {2, true}, {3, true}, {4, true}}).Median(); m != 2.5 {
		t.Errorf("1 2 3 4: %v", m)
	}
	minutes := []float64{2, 3, 3, 4, 5, 5, 6, 7, 8, 8, 10, 12, 15, 20, 30}
	done := []int{1, 1, 1, 1, 1, 0, 1, 1, 0, 1, 1, 0, 1, 1, 0}
	var sample []Duration
	for i := range minutes {
		sample = append(sample, Duration{minutes[i], done[i] == 1})
	}
	s := KaplanMeier(sample)
	want := []float64{.9333333333, .8, .7333333333, .6666666667, .5925925926, .5185185185, .4444444444, .3555555556, .2370370370, .1185185185}
	for i, step := range s.Steps {
		near(t, "S", step.Share, want[i], 1e-9)
	}
	if m, ok := s.Median(); !ok || m != 8 {
		t.Errorf("median %v", m)
	}
	mean, se, ok := s.RestrictedMean(30)
	if !ok {
		t.Fatal("no mean")
	}
	near(t, "mean to 30", mean, 11.28148148, 1e-8)
	near(t, "its error", se, 2.50460889, 1e-8)
	if _, ok := KaplanMeier([]Duration{{5, false}, {6, true}, {9, false}, {9, false}}).Median(); ok {
		t.Error("a share that never falls to one half has no median")
	}
}
