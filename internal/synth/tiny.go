package synth

import (
	"bufio"
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
)

// Rows is a delivery in memory. Ids are whole 64-bit numbers.
type Rows struct {
	Name        string
	Supervoxels []Supervoxel
	Contacts    []Contact
	Synapses    []Synapse
	Nuclei      []Nucleus
}

// Supervoxel is a row of table supervoxels, with the true neuron it belongs to.
type Supervoxel struct {
	ID, Segment uint64
	Voxels      int64
	X, Y, Z     float64 // nm
	Radius      float64 // nm; 0: not delivered
	Neuron      uint64  // 0: none
}

// Contact is a row of table contacts.
type Contact struct {
	A, B     uint64
	Affinity float64
	Area     float64 // nm²
}

// Synapse is a row of table synapses.
type Synapse struct {
	ID, Pre, Post uint64
	X, Y, Z       float64 // nm
	Confidence    float64
	Transmitter   string
}

// Nucleus is a row of table nuclei.
type Nucleus struct {
	ID, Supervoxel uint64
	X, Y, Z        float64 // nm
	Volume         float64 // nm³
}

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

// Shape describes the block of tissue that a delivery is of.
type Shape struct {
	VoxelNM [3]float64
	Max     [3]float64 // its far corner, nm; the near one is the origin
	Seams   []Seam
	Gaps    []Gap
}

// Seam is the plane where two slabs were joined again.
type Seam struct {
	Axis string // "x", "y" or "z"
	AtNM float64
}

// Gap is a stretch of missing images.
type Gap struct {
	Axis         string
	FromNM, ToNM float64
}

// Write writes the rows as a delivery folder.
func (r *Rows) Write(dir string, shape Shape) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return err
	}
	if err := os.WriteFile(filepath.Join(dir, "volume.json"), []byte(shape.describe(r.Name)), 0o644); err != nil {
		return err
	}
	for _, table := range []struct {
		name, header string
		rows         func(w io.Writer)
	}{
		{"supervoxels", "supervoxel_id,segment_id,voxel_count,x_nm,y_nm,z_nm,radius_nm", func(w io.Writer) {
			for _, s := range r.Supervoxels {
				radius := ""
				if s.Radius > 0 {
					radius = fmt.Sprintf("%.1f", s.Radius)
				}
				fmt.Fprintf(w, "%d,%d,%d,%.1f,%.1f,%.1f,%s\n", s.ID, s.Segment, s.Voxels, s.X, s.Y, s.Z, radius)
			}
		}},
		{"contacts", "a_supervoxel_id,b_supervoxel_id,affinity,area_nm2", func(w io.Writer) {
			for _, c := range r.Contacts {
				fmt.Fprintf(w, "%d,%d,%.4f,%.0f\n", c.A, c.B, c.Affinity, c.Area)
			}
		}},
		{"synapses", "synapse_id,pre_supervoxel_id,post_supervoxel_id,x_nm,y_nm,z_nm,confidence,transmitter", func(w io.Writer) {
			for _, s := range r.Synapses {
				fmt.Fprintf(w, "%d,%d,%d,%.1f,%.1f,%.1f,%.3f,%s\n", s.ID, s.Pre, s.Post, s.X, s.Y, s.Z, s.Confidence, s.Transmitter)
			}
		}},
		{"nuclei", "nucleus_id,supervoxel_id,x_nm,y_nm,z_nm,volume_nm3", func(w io.Writer) {
			for _, n := range r.Nuclei {
				fmt.Fprintf(w, "%d,%d,%.1f,%.1f,%.1f,%.0f\n", n.ID, n.Supervoxel, n.X, n.Y, n.Z, n.Volume)
			}
		}},
		{"truth", "supervoxel_id,neuron_id", func(w io.Writer) {
			for _, s := range r.Supervoxels {
				if s.Neuron != 0 {
					fmt.Fprintf(w, "%d,%d\n", s.ID, s.Neuron)
				}
			}
		}},
	} {
		if err := writeTable(filepath.Join(dir, table.name+".csv"), table.header, table.rows); err != nil {
			return err
		}
	}
	return nil
}

func writeTable(path, header string, rows func(w io.Writer)) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	w := bufio.NewWriter(f)
	fmt.Fprintln(w, header)
	rows(w)
	if err := w.Flush(); err != nil {
		f.Close()
		return err
	}
	return f.Close()
}

func (s Shape) describe(name string) string {
	triple := func(v [3]float64) string { return fmt.Sprintf("[%g,%g,%g]", v[0], v[1], v[2]) }
	var seams, gaps []string
	for _, m := range s.Seams {
		seams = append(seams, fmt.Sprintf(`{"axis":%q,"at_nm":%g}`, m.Axis, m.AtNM))
	}
	for _, g := range s.Gaps {
		gaps = append(gaps, fmt.Sprintf(`{"axis":%q,"from_nm":%g,"to_nm":%g}`, g.Axis, g.FromNM, g.ToNM))
	}
	return fmt.Sprintf(`{
  "name": %q,
  "voxel_nm": %s,
  "bounds_nm": {"min": [0,0,0], "max": %s},
  "seams": [%s],
  "gaps": [%s]
}
`, name, triple(s.VoxelNM), triple(s.Max), strings.Join(seams, ","), strings.Join(gaps, ","))
}
