package ledger_test

import (
	"bufio"
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/ledger/base"
)

// BenchmarkImport imports an invented delivery of 200,000 supervoxels, from CSV until the volume can be opened, into a
// database that keeps its promises about the disk.
//
//   - of-copy: how many times longer it takes to COPY the same rows, parsed beforehand, into ordinary tables and to build two
//     indexes on each. Both are measured in turn in the same run.
//   - bytes/supervoxel: what supervoxels, their ids and 2.8 contacts each take on disk. The index of ids is made from the ids
//     when a volume is opened and takes nothing.
func BenchmarkImport(b *testing.B) {
	d := inventRows(200_000)
	dir := b.TempDir()
	d.write(b, dir)
	pool := pgtest.NewDurable(b)
	var ours, copied time.Duration
	imports := 0
	for b.Loop() {
		began := time.Now()
		report, err := base.Import(b.Context(), pool, dir, base.ImportOptions{Name: fmt.Sprint("bench-", imports)})
		if err != nil {
			b.Fatal(err)
		}
		if _, err := base.Open(b.Context(), pool, report.Info.VolumeID); err != nil {
			b.Fatal(err)
		}
		ours += time.Since(began)
		imports++

		b.StopTimer()
		began = time.Now()
		if err := d.copyRows(b.Context(), pool); err != nil {
			b.Fatal(err)
		}
		copied += time.Since(began)
		if _, err := pool.Exec(b.Context(), `drop table plain_supervoxel, plain_contact, plain_synapse, plain_nucleus`); err != nil {
			b.Fatal(err)
		}
		b.StartTimer()
	}
	var size float64
	if err := pool.QueryRow(b.Context(), `select pg_total_relation_size('base_block')`).Scan(&size); err != nil {
		b.Fatal(err)
	}
	b.ReportMetric(copied.Seconds()/ours.Seconds(), "of-copy")
	b.ReportMetric(size/float64(imports)/float64(len(d.supervoxels)), "bytes/supervoxel")
}

// rows of a delivery as COPY wants them; ids are random 64-bit numbers.
type inventedRows struct {
	supervoxels, contacts, synapses, nuclei [][]any
}

// inventRows makes branching cells of up to some thousand supervoxels: each supervoxel touches its parent, and some more
// of its own cell or of others near by, 2.8 contacts a supervoxel in all, of which 1.8 are inside.
func inventRows(n int) *inventedRows {
	rng := rand.New(rand.NewPCG(3, 5))
	d := &inventedRows{}
	id := func() int64 { return int64(rng.Uint64()) }
	around := func(p [3]float64, nm float64) (q [3]float64) {
		for i := range p {
			q[i] = math.Round((p[i]+nm*rng.NormFloat64())*10) / 10
		}
		return q
	}
	touching := make(map[[2]int]bool)
	touch := func(a, b int, affinity float64) {
		pair := [2]int{min(a, b), max(a, b)}
		if touching[pair] {
			return
		}
		touching[pair] = true
		d.contacts = append(d.contacts, []any{d.supervoxels[a][0], d.supervoxels[b][0], math.Round(affinity*1e4) / 1e4, math.Round(2e4 + 1e6*rng.Float64()*rng.Float64())})
	}
	for len(d.supervoxels) < n {
		first, size := len(d.supervoxels), min(n-len(d.supervoxels), 20+int(4000*math.Pow(rng.Float64(), 3)))
		segment := id()
		at := make([][3]float64, size)
		for k := range size {
			at[k] = [3]float64{1e5 * rng.Float64(), 1e5 * rng.Float64(), 1e5 * rng.Float64()}
			parent := max(0, k-1)
			if k > 0 {
				if rng.IntN(50) == 0 {
					parent = rng.IntN(k)
				}
				at[k] = around(at[parent], 350)
			}
			voxels := int64(2000 + 400_000*math.Pow(rng.Float64(), 2))
			radius := math.Round(10*math.Cbrt(float64(voxels)*512*3/4/math.Pi)) / 10
			d.supervoxels = append(d.supervoxels, []any{id(), segment, voxels, at[k][0], at[k][1], at[k][2], radius})
			if k > 0 {
				touch(first+k, first+parent, 1-0.2*math.Pow(rng.Float64(), 3))
			}
			if k > 4 && rng.Float64() < 0.8 {
				touch(first+k, first+k-2-rng.IntN(3), 1-0.5*rng.Float64())
			}
			if k == 0 {
				p := around(at[k], 100)
				d.nuclei = append(d.nuclei, []any{id(), d.supervoxels[first][0], p[0], p[1], p[2], 1e11 * rng.Float64()})
			}
		}
	}
	transmitters := []string{"acetylcholine", "gaba", "glutamate"}
	for k := range n {
		other := rng.IntN(n)
		if d.supervoxels[other][1] != d.supervoxels[k][1] {
			touch(k, other, 0.4*rng.Float64())
		}
		if rng.IntN(6) == 0 {
			sv := d.supervoxels[k]
			d.synapses = append(d.synapses, []any{id(), sv[0], d.supervoxels[other][0], sv[3], sv[4], sv[5], math.Round(1e4*rng.Float64()) / 1e4, transmitters[rng.IntN(3)]})
		}
	}
	return d
}

// plainTables are what a program without packed blocks would keep.
var plainTables = []struct {
	name, header, create string
	indexes              [2]string
	rows                 func(*inventedRows) [][]any
	file                 string
}{
	{"plain_supervoxel", "supervoxel_id,segment_id,voxel_count,x_nm,y_nm,z_nm,radius_nm",
		"supervoxel_id bigint, segment_id bigint, voxel_count bigint, x_nm float8, y_nm float8, z_nm float8, radius_nm float8",
		[2]string{"supervoxel_id", "segment_id"}, func(d *inventedRows) [][]any { return d.supervoxels }, "supervoxels.csv"},
	{"plain_contact", "a_supervoxel_id,b_supervoxel_id,affinity,area_nm2",
		"a_supervoxel_id bigint, b_supervoxel_id bigint, affinity float8, area_nm2 float8",
		[2]string{"a_supervoxel_id", "b_supervoxel_id"}, func(d *inventedRows) [][]any { return d.contacts }, "contacts.csv"},
	{"plain_synapse", "synapse_id,pre_supervoxel_id,post_supervoxel_id,x_nm,y_nm,z_nm,confidence,transmitter",
		"synapse_id bigint, pre_supervoxel_id bigint, post_supervoxel_id bigint, x_nm float8, y_nm float8, z_nm float8, confidence float8, transmitter text",
		[2]string{"pre_supervoxel_id", "post_supervoxel_id"}, func(d *inventedRows) [][]any { return d.synapses }, "synapses.csv"},
	{"plain_nucleus", "nucleus_id,supervoxel_id,x_nm,y_nm,z_nm,volume_nm3",
		"nucleus_id bigint, supervoxel_id bigint, x_nm float8, y_nm float8, z_nm float8, volume_nm3 float8",
		[2]string{"nucleus_id", "supervoxel_id"}, func(d *inventedRows) [][]any { return d.nuclei }, "nuclei.csv"},
}

// copyRows does what of-copy compares with.
func (d *inventedRows) copyRows(ctx context.Context, pool *pgxpool.Pool) error {
	for _, t := range plainTables {
		if _, err := pool.Exec(ctx, "create table "+t.name+" ("+t.create+")"); err != nil {
			return err
		}
		if _, err := pool.CopyFrom(ctx, pgx.Identifier{t.name}, strings.Split(t.header, ","), pgx.CopyFromRows(t.rows(d))); err != nil {
			return err
		}
		for _, c := range t.indexes {
			if _, err := pool.Exec(ctx, "create index on "+t.name+" ("+c+")"); err != nil {
				return err
			}
		}
	}
	return nil
}

func (d *inventedRows) write(b *testing.B, dir string) {
	b.Helper()
	description := `{"name": "bench", "voxel_nm": [8, 8, 8], "bounds_nm": {"min": [-100000, -100000, -100000], "max": [200000, 200000, 200000]}, "seams": []}`
	if err := os.WriteFile(filepath.Join(dir, "volume.json"), []byte(description), 0o600); err != nil {
		b.Fatal(err)
	}
	for _, t := range plainTables {
		f, err := os.Create(filepath.Join(dir, t.file))
		if err != nil {
			b.Fatal(err)
		}
		w := bufio.NewWriter(f)
		fmt.Fprintln(w, t.header)
		for _, row := range t.rows(d) {
			for i, v := range row {
				if i > 0 {
					w.WriteByte(',') //nolint:errcheck // Flush tells
				}
				if n, ok := v.(int64); ok {
					v = uint64(n)
				}
				fmt.Fprint(w, v)
			}
			w.WriteByte('\n') //nolint:errcheck // Flush tells
		}
		if err := w.Flush(); err != nil {
			b.Fatal(err)
		}
		if err := f.Close(); err != nil {
			b.Fatal(err)
		}
	}
}
