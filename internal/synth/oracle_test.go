package synth

import (
	"math"
	"slices"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
)

func TestAPerfectPersonFindsEveryPlantedError(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	r, shape, a := Make(Options{Seed: 5, Neurons: 12})
	if err := r.Write(dir, shape); err != nil {
		t.Fatal(err)
	}
	truth, err := ReadTruth(dir)
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(r.Truth(), truth); diff != "" {
		t.Fatal(diff)
	}
	members, segment := make(map[uint64][]uint64), make(map[uint64]uint64)
	for _, s := range r.Supervoxels {
		members[s.Segment] = append(members[s.Segment], s.ID)
		segment[s.ID] = s.Segment
	}
	o := NewOracle(truth, Habits{Person: "alder", Median: time.Minute})
	for _, p := range a.FalseSplits {
		if v := o.Merge(p.A, p.B); v.Outcome != Corrected || v.Took != time.Minute {
			t.Errorf("%+v: %+v", p, v)
		}
	}
	for _, p := range a.FalseMerges {
		v := o.Split([][]uint64{{p.A}, {p.B}}, members[segment[p.A]])
		if v.Outcome != Corrected || v.Took != 2*time.Minute || len(v.Groups) != 2 {
			t.Fatalf("%+v: %+v", p, v)
		}
		if !slices.Contains(v.Groups[0], p.A) || !slices.Contains(v.Groups[1], p.B) {
			t.Errorf("%+v: seeds %v leave out the place", p, v.Groups)
		}
		for i, at := range []uint64{p.A, p.B} {
			for _, id := range v.Groups[i] {
				if truth[id] != truth[at] || segment[id] != segment[p.A] {
					t.Errorf("%+v: seed %d is of neuron %d in segment %d", p, id, truth[id], segment[id])
				}
			}
		}
		if v := o.Merge(p.A, p.B); v.Outcome != Sound {
			t.Errorf("two neurons are no false split: %+v", v)
		}
	}
	for _, c := range r.Contacts[:200] {
		if truth[c.A] == 0 || truth[c.B] == 0 {
			continue
		}
		if v := o.Split([][]uint64{{c.A}, {c.B}}, nil); (v.Outcome == Sound) != (truth[c.A] == truth[c.B]) {
			t.Errorf("contact of neurons %d, %d: %s", truth[c.A], truth[c.B], v.Outcome)
		}
	}
}

func TestWhatHasNoTruthIsUnclear(t *testing.T) {
	t.Parallel()
	o := NewOracle(map[uint64]uint64{1: 7}, Habits{})
	if v := o.Merge(1, 2); v.Outcome != Unclear {
		t.Error(v)
	}
	if v := o.Split([][]uint64{{1}, {2}}, []uint64{1, 2}); v.Outcome != Unclear {
		t.Error(v)
	}
}

// Error rate and median are met within four standard errors, whatever the order of the places.
func TestPeopleErrAndTakeTimeAsTheirHabitsSay(t *testing.T) {
	t.Parallel()
	const n = 4000
	truth := make(map[uint64]uint64)
	for id := range uint64(n + 1) {
		truth[id+1] = 1
	}
	o := NewOracle(truth, Habits{Person: "birch", Seed: 3, ErrorRate: 0.1, Median: time.Minute, Spread: 0.5})
	wrong, slow := 0, 0
	for id := range uint64(n) {
		v := o.Merge(id+1, id+2)
		if diff := cmp.Diff(v, o.Merge(id+2, id+1)); diff != "" {
			t.Fatal(diff)
		}
		if v.Wrong != (v.Outcome == Sound) {
			t.Fatalf("%+v", v)
		}
		if v.Wrong {
			wrong++
		}
		if v.Took > time.Minute {
			slow++
		}
	}
	if se := math.Sqrt(0.1 * 0.9 * n); math.Abs(float64(wrong)-0.1*n) > 4*se {
		t.Errorf("%d of %d wrong", wrong, n)
	}
	if se := math.Sqrt(0.25 * n); math.Abs(float64(slow)-0.5*n) > 4*se {
		t.Errorf("%d of %d slower than the median", slow, n)
	}
	if diff := cmp.Diff(Habitual("cedar", 1), Habitual("cedar", 1)); diff != "" {
		t.Error(diff)
	}
	if cmp.Equal(Habitual("cedar", 1).Median, Habitual("alder", 1).Median) {
		t.Error("two people have the same habits")
	}
}
