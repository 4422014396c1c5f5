package base_test

import (
	"bytes"
	"compress/gzip"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"github.com/parquet-go/parquet-go"
)

// A delivery in memory. Field tags are the columns' names.
type (
	delivery struct {
		description string
		supervoxels []supervoxel
		contacts    []contact
		synapses    []synapse
		nuclei      []nucleus
		truth       []truth
	}
	supervoxel struct {
		ID      uint64   `parquet:"supervoxel_id"`
		Segment uint64   `parquet:"segment_id"`
		Voxels  int64    `parquet:"voxel_count"`
		X       float64  `parquet:"x_nm"`
		Y       float64  `parquet:"y_nm"`
		Z       float64  `parquet:"z_nm"`
		Radius  *float64 `parquet:"radius_nm,optional"`
	}
	contact struct {
		A        uint64   `parquet:"a_supervoxel_id"`
		B        uint64   `parquet:"b_supervoxel_id"`
		Affinity float64  `parquet:"affinity"`
		Area     *float64 `parquet:"area_nm2,optional"`
	}
	synapse struct {
		ID          uint64  `parquet:"synapse_id"`
		Pre         uint64  `parquet:"pre_supervoxel_id"`
		Post        uint64  `parquet:"post_supervoxel_id"`
		X           float64 `parquet:"x_nm"`
		Y           float64 `parquet:"y_nm"`
		Z           float64 `parquet:"z_nm"`
		Confidence  float64 `parquet:"confidence"`
		Transmitter *string `parquet:"transmitter,optional"`
	}
	nucleus struct {
		ID         uint64  `parquet:"nucleus_id"`
		Supervoxel uint64  `parquet:"supervoxel_id"`
		X          float64 `parquet:"x_nm"`
		Y          float64 `parquet:"y_nm"`
		Z          float64 `parquet:"z_nm"`
		Volume     float64 `parquet:"volume_nm3"`
	}
	truth struct {
		Supervoxel uint64 `parquet:"supervoxel_id"`
		Neuron     uint64 `parquet:"neuron_id"`
	}
)

// invent makes a delivery of n supervoxels: segments of all sizes, some in parts, coordinates that collide, ids over the
// whole range, synapses within one supervoxel, hubs with many contacts.
func invent(rng *rand.Rand, n int) *delivery {
	d := &delivery{truth: []truth{}, description: `{"name": "invented", "voxel_nm": [8, 8, 40], "bounds_nm": {"min": [0, 0, 0], "max": [10000, 10000, 10000]},
		"seams": [{"axis": "x", "at_nm": 5000.5}], "gaps": [{"axis": "z", "from_nm": 1, "to_nm": 2}]}`}
	used := map[uint64]bool{0: true}
	id := func() uint64 {
		for {
			x := rng.Uint64() >> (rng.IntN(2) * rng.IntN(60))
			if !used[x] {
				used[x] = true
				return x
			}
		}
	}
	some := func(x float64) *float64 {
		if rng.IntN(5) == 0 {
			return nil
		}
		return &x
	}
	segment := id()
	for k := range n {
		if rng.IntN(1+k%97) == 0 {
			segment = id()
		}
		d.supervoxels = append(d.supervoxels, supervoxel{
			ID: id(), Segment: segment, Voxels: 1 + rng.Int64N(1<<(1+rng.IntN(40))),
			X: float64(rng.IntN(101)) * 100, Y: float64(rng.IntN(101)) * 100, Z: float64(rng.IntN(1001)) * 10, Radius: some(float64(rng.IntN(1000)) / 2),
		})
	}
	pick := func() uint64 { return d.supervoxels[rng.IntN(n)].ID }
	seen := make(map[[2]uint64]bool)
	for k := range 3 * n {
		i, j := k%n, (k+1+rng.IntN(3))%n
		if rng.IntN(4) == 0 {
			j = rng.IntN(1 + n/10) // some supervoxels touch a great many
		}
		a, b := d.supervoxels[i].ID, d.supervoxels[j].ID
		if pair := [2]uint64{min(a, b), max(a, b)}; a != b && !seen[pair] {
			seen[pair] = true
			d.contacts = append(d.contacts, contact{a, b, float64(rng.IntN(10001)) / 1e4, some(rng.Float64() * 1e6)})
		}
	}
	transmitters := []string{"gaba", "acetylcholine", `quoted "name", with comma`}
	for range n / 2 {
		s := synapse{ID: id(), Pre: pick(), Post: pick(), X: rng.Float64() * 1e4, Y: 5.5, Z: -3, Confidence: rng.Float64()}
		if k := rng.IntN(4); k < 3 {
			s.Transmitter = &transmitters[k]
		}
		d.synapses = append(d.synapses, s)
	}
	for range n / 20 {
		d.nuclei = append(d.nuclei, nucleus{id(), pick(), 1, 2.5, rng.Float64() * 1e4, rng.Float64() * 1e12})
	}
	for _, sv := range d.supervoxels {
		if rng.IntN(10) > 0 {
			d.truth = append(d.truth, truth{sv.ID, sv.Segment / 3})
		}
	}
	return d
}

// shuffled is the same rows in another order, contacts with their sides swapped.
func (d *delivery) shuffled(rng *rand.Rand) *delivery {
	s := &delivery{description: d.description}
	s.supervoxels, s.contacts, s.synapses = shuffle(rng, d.supervoxels), shuffle(rng, d.contacts), shuffle(rng, d.synapses)
	s.nuclei, s.truth = shuffle(rng, d.nuclei), shuffle(rng, d.truth)
	for i := range s.contacts {
		if c := &s.contacts[i]; rng.IntN(2) == 0 {
			c.A, c.B = c.B, c.A
		}
	}
	return s
}

func shuffle[T any](rng *rand.Rand, rows []T) []T {
	out := make([]T, len(rows))
	for i, k := range rng.Perm(len(rows)) {
		out[i] = rows[k]
	}
	return out
}

// write makes a folder of the delivery. ending: ".csv", ".csv.gz" or ".parquet".
func (d *delivery) write(t testing.TB, ending string) string {
	t.Helper()
	dir := t.TempDir()
	put(t, dir, "volume.json", []byte(d.description))
	writeTable(t, dir, "supervoxels"+ending, d.supervoxels)
	writeTable(t, dir, "contacts"+ending, d.contacts)
	writeTable(t, dir, "synapses"+ending, d.synapses)
	writeTable(t, dir, "nuclei"+ending, d.nuclei)
	if d.truth != nil {
		writeTable(t, dir, "truth"+ending, d.truth)
	}
	return dir
}

func put(t testing.TB, dir, name string, content []byte) {
	t.Helper()
	if err := os.WriteFile(filepath.Join(dir, name), content, 0o600); err != nil {
		t.Fatal(err)
	}
}

func writeTable[T any](t testing.TB, dir, name string, rows []T) {
	t.Helper()
	var b bytes.Buffer
	switch {
	case strings.HasSuffix(name, ".parquet"):
		w := parquet.NewGenericWriter[T](&b, parquet.Compression(&parquet.Zstd), parquet.MaxRowsPerRowGroup(700), parquet.PageBufferSize(1000))
		if _, err := w.Write(rows); err != nil {
			t.Fatal(err)
		}
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
	case strings.HasSuffix(name, ".gz"):
		z := gzip.NewWriter(&b)
		z.Write([]byte(csvText(rows))) //nolint:errcheck // to memory
		z.Close()                      //nolint:errcheck // to memory
	default:
		b.WriteString(csvText(rows))
	}
	put(t, dir, name, b.Bytes())
}

// csvText writes rows with their field tags as header, columns from last to first: their order is free.
func csvText[T any](rows []T) string {
	var b strings.Builder
	typ := reflect.TypeFor[T]()
	for i := typ.NumField() - 1; i >= 0; i-- {
		name, _, _ := strings.Cut(typ.Field(i).Tag.Get("parquet"), ",")
		b.WriteString(name + ",")
	}
	lines := []string{strings.TrimSuffix(b.String(), ",")}
	for _, row := range rows {
		v := reflect.ValueOf(row)
		var cells []string
		for i := typ.NumField() - 1; i >= 0; i-- {
			f := v.Field(i)
			if f.Kind() == reflect.Pointer {
				if f.IsNil() {
					cells = append(cells, "")
					continue
				}
				f = f.Elem()
			}
			text := fmt.Sprint(f.Interface())
			if strings.ContainsAny(text, `",`) {
				text = `"` + strings.ReplaceAll(text, `"`, `""`) + `"`
			}
			cells = append(cells, text)
		}
		lines = append(lines, strings.Join(cells, ","))
	}
	return strings.Join(lines, "\n") + "\n"
}
