package synth

import (
	"bufio"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
)

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
