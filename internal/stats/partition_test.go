package stats

import (
	"encoding/json"
	"os"
	"testing"
)

// Scores of scikit-image 0.19.3 (variation of information) and scikit-learn 1.2.1 (adjusted Rand), and the with-replacement scores from their formula.
func TestPartitions(t *testing.T) {
	text, err := os.ReadFile("../../testdata/checks/partition_cases.json")
	if err != nil {
		t.Fatal(err)
	}
	var cases []struct {
		Name           string
		Truth, Segment []int
		Weight         []float64
		Split          float64  `json:"voi_split_bits"`
		Merge          float64  `json:"voi_merge_bits"`
		Precision      float64  `json:"rand_merge_score"`
		Recall         float64  `json:"rand_split_score"`
		Adjusted       *float64 `json:"adjusted_rand"`
	}
	if err := json.Unmarshal(text, &cases); err != nil || len(cases) < 10 {
		t.Fatal(len(cases), err)
	}
	adjusted := 0
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
		near(t, c.Name+" error", a.Error, 1-2*c.Precision*c.Recall/(c.Precision+c.Recall), 1e-9)
		if c.Adjusted != nil && c.Weight == nil {
			near(t, c.Name+" adjusted Rand", a.Adjusted, *c.Adjusted, 1e-9)
			adjusted++
		}
	}
	if adjusted < 10 {
		t.Errorf("%d cases have an adjusted Rand index", adjusted)
	}
	if _, ok := Agree[int, int](nil); ok {
		t.Error("nothing agrees with nothing")
	}
}

// A voxel is an element: weights of whole numbers score as so many single elements.
func TestWeightsAreElements(t *testing.T) {
	var one, many []Overlap[int, int]
	for _, r := range []Overlap[int, int]{{1, 1, 4}, {1, 2, 3}, {2, 2, 6}, {3, 3, 1}} {
		one = append(one, r)
		for range int(r.Weight) {
			many = append(many, Overlap[int, int]{r.True, r.Segment, 1})
		}
	}
	a, _ := Agree(one)
	b, _ := Agree(many)
	if a != b {
		t.Errorf("%+v, %+v", a, b)
	}
}
