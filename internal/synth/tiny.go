package synth

import (
	"fmt"
	"math/rand/v2"
)

// WriteTiny writes a small random delivery of n supervoxels for property tests: several base segments, trees and meshes and
// some that hang together by nothing, contacts between segments, ids over the whole range of 64 bits.
func WriteTiny(dir string, seed uint64, n int) (*Rows, error) {
	rng := rand.New(rand.NewPCG(seed, 1))
	r := &Rows{Name: fmt.Sprintf("tiny-%d", seed)}
	ids := randomIDs(rng, 2*n)
	for i := range n {
		r.Supervoxels = append(r.Supervoxels, Supervoxel{ID: ids[i], Voxels: 1 + rng.Int64N(5000),
			X: float64(rng.IntN(20000)), Y: float64(rng.IntN(20000)), Z: float64(rng.IntN(20000)), Neuron: 1 + rng.Uint64N(4)})
	}
	segments := ids[n : n+max(2, n/5)]
	for i := range r.Supervoxels {
		k := i % len(segments) // every segment has one
		if i >= len(segments) {
			k = rng.IntN(1 + rng.IntN(len(segments))) // the first ones are larger
		}
		r.Supervoxels[i].Segment = segments[k]
	}
	r.connect(rng)
	for i := range n {
		a, b := rng.IntN(n), rng.IntN(n)
		r.Synapses = append(r.Synapses, Synapse{ID: uint64(1000 + i), Pre: ids[a], Post: ids[b],
			X: r.Supervoxels[a].X, Y: r.Supervoxels[a].Y, Z: r.Supervoxels[a].Z, Confidence: rng.Float64()})
	}
	for i := range 1 + n/15 {
		s := r.Supervoxels[rng.IntN(n)]
		r.Nuclei = append(r.Nuclei, Nucleus{ID: uint64(i + 1), Supervoxel: s.ID, X: s.X, Y: s.Y, Z: s.Z, Volume: 1e11})
	}
	return r, r.Write(dir, Shape{VoxelNM: [3]float64{8, 8, 40}, Max: [3]float64{20000, 20000, 20000}})
}

// connect joins most segments by a random tree with a few contacts more, leaves some in pieces, and lets some touch.
func (r *Rows) connect(rng *rand.Rand) {
	seen := make(map[[2]uint64]bool)
	add := func(a, b Supervoxel, affinity float64) {
		key := [2]uint64{min(a.ID, b.ID), max(a.ID, b.ID)}
		if a.ID == b.ID || seen[key] {
			return
		}
		seen[key] = true
		r.Contacts = append(r.Contacts, Contact{A: a.ID, B: b.ID, Affinity: affinity, Area: 100 + float64(rng.IntN(100000))})
	}
	members := make(map[uint64][]Supervoxel)
	for _, s := range r.Supervoxels {
		if m := members[s.Segment]; len(m) > 0 && rng.IntN(12) > 0 {
			add(m[rng.IntN(len(m))], s, rng.Float64())
			add(m[rng.IntN(len(m))], s, rng.Float64())
		}
		members[s.Segment] = append(members[s.Segment], s)
	}
	for range len(r.Supervoxels) {
		a, b := r.Supervoxels[rng.IntN(len(r.Supervoxels))], r.Supervoxels[rng.IntN(len(r.Supervoxels))]
		if a.Segment != b.Segment {
			add(a, b, rng.Float64()/2)
		}
	}
}

// randomIDs draws distinct ids from the whole range, the hard ones first: beyond a double, beyond a signed number, the last.
func randomIDs(rng *rand.Rand, n int) []uint64 {
	ids := []uint64{1<<53 + 1, 1 << 63, 1<<64 - 1, 1<<53 + 2}
	seen := map[uint64]bool{0: true}
	for _, id := range ids {
		seen[id] = true
	}
	for len(ids) < n {
		if id := rng.Uint64(); !seen[id] {
			seen[id] = true
			ids = append(ids, id)
		}
	}
	return ids[:n]
}
