package stats

import (
	"encoding/csv"
	"encoding/json"
	"math"
	"os"
	"strconv"
	"testing"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if math.IsNaN(got) || math.Abs(got-want) > tolerance {
		t.Errorf("%s: %v, want %v", what, got, want)
	}
}

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

// Freireich et al. 1963 as in R's MASS::gehan, estimated with R survival 3.5-3.
func TestKaplanMeierOnFreireich(t *testing.T) {
	f, err := os.Open("../../testdata/checks/freireich_gehan.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	arms := make(map[string][]Duration)
	for _, r := range rows[1:] {
		time, err := strconv.ParseFloat(r[1], 64)
		if err != nil {
			t.Fatal(err)
		}
		arms[r[3]] = append(arms[r[3]], Duration{time, r[2] == "1"})
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
	if m, ok := KaplanMeier(arms["control"]).Median(); !ok || m != 8 {
		t.Errorf("median of control %v %v", m, ok)
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
	if _, ok := KaplanMeier([]Duration{{5, false}, {6, true}, {9, false}, {9, false}}).Median(); ok {
		t.Error("a share that never falls to one half has no median")
	}
}

// Scores of scikit-image 0.19.3 (variation of information), and the with-replacement scores from their formula.
func TestPartitions(t *testing.T) {
	text, err := os.ReadFile("../../testdata/checks/partition_cases.json")
	if err != nil {
		t.Fatal(err)
	}
	var cases []struct {
		Name           string
		Truth, Segment []int
		Weight         []float64
		Split          float64 `json:"voi_split_bits"`
		Merge          float64 `json:"voi_merge_bits"`
		Precision      float64 `json:"rand_merge_score"`
		Recall         float64 `json:"rand_split_score"`
	}
	if err := json.Unmarshal(text, &cases); err != nil || len(cases) < 10 {
		t.Fatal(len(cases), err)
	}
	for _, c := range cases {
		rows := make([]Overlap[int, int], len(c.Truth))
		for i := range rows {
			rows[i] = Overlap[int, int]{c.Truth[i], c.Segment[i], 1}
			if c.Weight != nil {
				rows[i].Weight = c.Weight[i]
			}
		}
		a, ok := Agree(rows)
		if !ok {
			t.Fatal(c.Name)
		}
		near(t, c.Name+" split", a.Split, c.Split, 1e-9)
		near(t, c.Name+" merge", a.Merge, c.Merge, 1e-9)
		near(t, c.Name+" precision", a.Precision, c.Precision, 1e-9)
		near(t, c.Name+" recall", a.Recall, c.Recall, 1e-9)
	}
}
