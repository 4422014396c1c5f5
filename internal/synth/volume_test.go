package synth

import (
	"crypto/sha256"
	"os"
	"path/filepath"
	"testing"

	"github.com/google/go-cmp/cmp"
)

var tables = []string{"volume.json", "supervoxels.csv", "contacts.csv", "synapses.csv", "nuclei.csv", "truth.csv"}

// The same seed gives the same files to the byte; another one gives others.
func TestSameSeedSameFiles(t *testing.T) {
	t.Parallel()
	write := func(seed uint64) map[string][32]byte {
		dir := t.TempDir()
		if _, err := Write(dir, Options{Seed: seed, Neurons: 6}); err != nil {
			t.Fatal(err)
		}
		sums := make(map[string][32]byte)
		for _, name := range tables {
			text, err := os.ReadFile(filepath.Join(dir, name))
			if err != nil {
				t.Fatal(err)
			}
			sums[name] = sha256.Sum256(text)
		}
		return sums
	}
	first := write(7)
	if diff := cmp.Diff(first, write(7)); diff != "" {
		t.Error(diff)
	}
	if other := write(8); other["supervoxels.csv"] == first["supervoxels.csv"] || other["contacts.csv"] == first["contacts.csv"] {
		t.Error("two seeds gave the same cells")
	}
}

func TestDemonstrationHasWhatItPromises(t *testing.T) {
	t.Parallel()
	for seed := range uint64(2) {
		r, shape, a := Make(Options{Seed: seed})
		if r.Name != "cricket-ganglion" || len(r.Nuclei) != 24 {
			t.Errorf("%s with %d cells", r.Name, len(r.Nuclei))
		}
		if n := len(r.Supervoxels); n < 16000 || n > 26000 {
			t.Errorf("seed %d: %d supervoxels", seed, n)
		}
		if m, s := Places(a.FalseMerges), Places(a.FalseSplits); m < 30 || s < 60 {
			t.Errorf("seed %d: %d false merges, %d false splits", seed, m, s)
		}
		for _, v := range r.Supervoxels {
			if at := (point{v.X, v.Y, v.Z}); min(v.X, v.Y, v.Z) < 0 || at[0] > shape.Max[0] || at[1] > shape.Max[1] || at[2] > shape.Max[2] {
				t.Fatalf("seed %d: supervoxel outside the block: %+v", seed, v)
			}
		}
		if len(r.Synapses) < 1000 {
			t.Errorf("seed %d: %d synapses", seed, len(r.Synapses))
		}
	}
}

// Ids are distinct and reach over the whole range; some are above 2^63, and some are one number as doubles.
func TestIdsNeedAll64Bits(t *testing.T) {
	t.Parallel()
	r, _, _ := Make(Options{Seed: 1, Neurons: 6})
	seen, doubles := make(map[uint64]bool), make(map[float64]int)
	var high, alike int
	var quarters [4]int
	for _, s := range r.Supervoxels {
		if seen[s.ID] {
			t.Fatalf("id %d is given twice", s.ID)
		}
		seen[s.ID] = true
		if s.ID >= 1<<63 {
			high++
		}
		if doubles[float64(s.ID)]++; doubles[float64(s.ID)] > 1 {
			alike++
		}
		quarters[s.ID>>62]++
	}
	for q, n := range quarters {
		if n < len(r.Supervoxels)/5 {
			t.Errorf("quarter %d of the range has %d of %d ids", q, n, len(r.Supervoxels))
		}
	}
	if high == 0 || alike < 20 {
		t.Errorf("%d ids above 2^63, %d that a double can't tell from another", high, alike)
	}
}

// Segments are the components of the contacts with an affinity of one half and more, as the files give it.
func TestSegmentsAreWhatAcceptedContactsJoin(t *testing.T) {
	t.Parallel()
	r, _, _ := Make(Options{Seed: 2, Neurons: 8})
	index := make(map[uint64]int)
	for i, s := range r.Supervoxels {
		index[s.ID] = i
	}
	u := newUnionFind(len(r.Supervoxels))
	for _, c := range r.Contacts {
		if c.Affinity >= 0.5 {
			u.union(index[c.A], index[c.B])
		}
	}
	segment, root := make(map[int]uint64), make(map[uint64]int)
	for i, s := range r.Supervoxels {
		c := u.find(i)
		if id, ok := segment[c]; ok && id != s.Segment {
			t.Fatalf("supervoxel %d is joined to segment %d and says %d", s.ID, id, s.Segment)
		}
		if k, ok := root[s.Segment]; ok && k != c {
			t.Fatalf("segment %d is in pieces", s.Segment)
		}
		segment[c], root[s.Segment] = s.Segment, c
	}
}

// Answers name contacts of the delivery: false merges join two neurons in one segment, false splits leave one neuron in two.
func TestAnswersAreErrors(t *testing.T) {
	t.Parallel()
	r, _, a := Make(Options{Seed: 3, Neurons: 12})
	of := make(map[uint64]Supervoxel)
	for _, s := range r.Supervoxels {
		of[s.ID] = s
	}
	for _, p := range a.FalseMerges {
		if x, y := of[p.A], of[p.B]; x.Segment != y.Segment || x.Neuron == y.Neuron || p.Affinity < 0.5 {
			t.Errorf("no false merge: %+v %+v %+v", p, x, y)
		}
	}
	for _, p := range a.FalseSplits {
		if x, y := of[p.A], of[p.B]; x.Segment == y.Segment || x.Neuron != y.Neuron || p.Affinity >= 0.5 {
			t.Errorf("no false split: %+v %+v %+v", p, x, y)
		}
	}
	// And none is missing: every accepted contact between two neurons is an answer.
	planted := make(map[[2]uint64]bool)
	for _, p := range a.FalseMerges {
		planted[[2]uint64{p.A, p.B}] = true
	}
	for _, c := range r.Contacts {
		if c.Affinity >= 0.5 && of[c.A].Neuron != of[c.B].Neuron && !planted[[2]uint64{c.A, c.B}] {
			t.Errorf("contact %+v joins neurons %d and %d unplanned", c, of[c.A].Neuron, of[c.B].Neuron)
		}
	}
}

// A neuron is in one piece in truth, and no segment has more than two nuclei.
func TestNeuronsAreWhole(t *testing.T) {
	t.Parallel()
	r, _, a := Make(Options{Seed: 4, Neurons: 8})
	index := make(map[uint64]int)
	for i, s := range r.Supervoxels {
		index[s.ID] = i
	}
	u := newUnionFind(len(r.Supervoxels))
	for _, c := range r.Contacts {
		if x, y := index[c.A], index[c.B]; c.Affinity >= 0.5 && r.Supervoxels[x].Neuron == r.Supervoxels[y].Neuron {
			u.union(x, y)
		}
	}
	for _, p := range a.FalseSplits {
		u.union(index[p.A], index[p.B])
	}
	whole := make(map[uint64]int)
	for i, s := range r.Supervoxels {
		if s.Neuron == 0 {
			continue
		}
		if k, ok := whole[s.Neuron]; ok && k != u.find(i) {
			t.Fatalf("neuron %d is in pieces even in truth", s.Neuron)
		}
		whole[s.Neuron] = u.find(i)
	}
	nuclei := make(map[uint64]int)
	for _, n := range r.Nuclei {
		s := r.Supervoxels[index[n.Supervoxel]].Segment
		if nuclei[s]++; nuclei[s] > 2 {
			t.Errorf("segment %d has %d nuclei", s, nuclei[s])
		}
	}
}
