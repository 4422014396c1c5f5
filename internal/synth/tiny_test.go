package synth

import (
	"testing"

	"github.com/google/go-cmp/cmp"
)

// Tiny deliveries are valid: ids are distinct, contacts and synapses name supervoxels, no contact twice. Between them they have
// what ledgers stumble over.
func TestTinyDeliveries(t *testing.T) {
	t.Parallel()
	var loose, rejected, alone int
	for seed := range uint64(60) {
		n := 5 + int(seed)%56
		r, err := WriteTiny(t.TempDir(), seed, n)
		if err != nil {
			t.Fatal(err)
		}
		again, err := WriteTiny(t.TempDir(), seed, n)
		if diff := cmp.Diff(r, again); err != nil || diff != "" {
			t.Fatal(err, diff)
		}
		index, sizes := make(map[uint64]int), make(map[uint64]int)
		for i, s := range r.Supervoxels {
			index[s.ID] = i
			sizes[s.Segment]++
		}
		if len(index) != n || len(sizes) < 2 {
			t.Errorf("seed %d: %d ids, %d segments", seed, len(index), len(sizes))
		}
		u, seen := newUnionFind(n), make(map[[2]uint64]bool)
		for _, c := range r.Contacts {
			a, okA := index[c.A]
			b, okB := index[c.B]
			key := [2]uint64{min(c.A, c.B), max(c.A, c.B)}
			if !okA || !okB || a == b || seen[key] {
				t.Errorf("seed %d: contact %+v", seed, c)
			}
			seen[key] = true
			if r.Supervoxels[a].Segment == r.Supervoxels[b].Segment {
				u.union(a, b)
			} else {
				rejected++
			}
		}
		parts := make(map[int]bool)
		for i := range n {
			parts[u.find(i)] = true
		}
		if len(parts) > len(sizes) {
			loose++
		}
		for _, size := range sizes {
			if size == 1 {
				alone++
			}
		}
		for _, s := range r.Synapses {
			if _, ok := index[s.Pre]; !ok {
				t.Errorf("seed %d: synapse %+v", seed, s)
			}
		}
	}
	if loose < 10 || rejected < 100 || alone < 10 {
		t.Errorf("%d deliveries with a segment in pieces, %d rejected contacts, %d segments of one supervoxel", loose, rejected, alone)
	}
}
