package ledger_test

import (
	"bufio"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"sync"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
)

// What the lookups are measured on.
const (
	lookupVoxels  = 1_000_000 // supervoxels
	lookupSegment = 25        // supervoxels a base segment
	lookupMerges  = 20_000    // each puts one range in force
	lookupAsked   = 100_000   // random supervoxels a call
	lookupBatch   = 10_000    // ids a SELECT
)

// BenchmarkSegmentOf looks up 100,000 random supervoxels of 1,000,000, with 20,000 ranges in force, now and as of the middle of the
// ledger. The metric of-select is lookups a second over those of SELECT … WHERE id = ANY($1), in batches of 10,000, on a plain
// indexed table of the same database, measured in turn in the same run.
func BenchmarkSegmentOf(b *testing.B) {
	pool := pgtest.New(b)
	ids := lookupIDs()
	v := lookupVolume(b, pool, ids)
	plainLookups(b, pool, ids)
	rng := rand.New(rand.NewPCG(7, 11))
	asked := make([]ledger.ID, lookupAsked)
	for i := range asked {
		asked[i] = ids[rng.IntN(len(ids))]
	}
	for _, c := range []struct {
		name string
		at   ledger.At
	}{{"now", ledger.At{}}, {"asof", ledger.AtPosition(lookupMerges / 2)}} {
		b.Run(c.name, func(b *testing.B) {
			var ours, plain time.Duration
			for b.Loop() {
				began := time.Now()
				got, err := v.SegmentsOf(b.Context(), asked, c.at)
				if err != nil || len(got) != len(asked) {
					b.Fatal(len(got), err)
				}
				ours += time.Since(began)
				b.StopTimer()
				plain += selectAll(b, pool, asked)
				b.StartTimer()
			}
			b.ReportMetric(plain.Seconds()/ours.Seconds(), "of-select")
			b.ReportMetric(float64(b.N)*lookupAsked/ours.Seconds(), "lookups/s")
		})
	}
}

// lookupIDs are random 64-bit ids, supervoxel after supervoxel of each base segment.
func lookupIDs() []ledger.ID {
	rng := rand.New(rand.NewPCG(1, 2))
	ids := make([]ledger.ID, lookupVoxels)
	for i := range ids {
		ids[i] = ledger.ID(rng.Uint64())
	}
	return ids
}

// lookupVolume imports small base segments and joins them two by two.
func lookupVolume(b *testing.B, pool *pgxpool.Pool, ids []ledger.ID) *ledger.Volume {
	b.Helper()
	dir := b.TempDir()
	writeLookups(b, dir, ids)
	report, err := base.Import(b.Context(), pool, dir, base.ImportOptions{})
	if err != nil {
		b.Fatal(err)
	}
	v, err := ledger.New(pool).Volume(b.Context(), report.Info.Name)
	if err != nil {
		b.Fatal(err)
	}
	const writers = 100
	var wg sync.WaitGroup
	for w := range writers {
		wg.Go(func() {
			for k := w; k < lookupMerges; k += writers {
				if err := joinTwo(b, v, ids[2*k*lookupSegment], ids[(2*k+1)*lookupSegment]); err != nil {
					b.Error(err)
					return
				}
			}
		})
	}
	wg.Wait()
	var ranges int
	if err := pool.QueryRow(b.Context(), `select count(*) from piece where to_position is null`).Scan(&ranges); err != nil || ranges < lookupMerges {
		b.Fatalf("%d ranges are in force, %v", ranges, err)
	}
	if _, err := pool.Exec(b.Context(), `vacuum analyze piece, segment`); err != nil {
		b.Fatal(err)
	}
	return v
}

// joinTwo merges two base segments that nobody has touched; the k-th base segment's id is k + 1.
func joinTwo(b *testing.B, v *ledger.Volume, x, y ledger.ID) error {
	expected, err := v.SegmentsOf(b.Context(), []ledger.ID{x, y}, ledger.At{})
	if err != nil {
		return err
	}
	_, err = v.Post(b.Context(), ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "alder", Reason: "bench", Expected: expected,
		Merge: &ledger.Merge{A: x, B: y}})
	return err
}

// writeLookups writes a delivery: in each base segment every supervoxel touches the one before.
func writeLookups(b *testing.B, dir string, ids []ledger.ID) {
	b.Helper()
	write := func(name string, rows func(w *bufio.Writer)) {
		f, err := os.Create(filepath.Join(dir, name))
		if err != nil {
			b.Fatal(err)
		}
		w := bufio.NewWriter(f)
		rows(w)
		if err := w.Flush(); err != nil {
			b.Fatal(err)
		}
		if err := f.Close(); err != nil {
			b.Fatal(err)
		}
	}
	write("volume.json", func(w *bufio.Writer) {
		fmt.Fprint(w, `{"name": "bench", "voxel_nm": [8, 8, 8], "bounds_nm": {"min": [0, 0, 0], "max": [200000, 200000, 200000]}, "seams": []}`)
	})
	write("supervoxels.csv", func(w *bufio.Writer) {
		fmt.Fprintln(w, plainTables[0].header)
		for i, id := range ids {
			n := i / lookupSegment
			fmt.Fprintf(w, "%d,%d,1000,%d,%d,%d,100\n", id, n+1, 900*(n%200)+4*(i%lookupSegment), 900*(n/200), 8*(i%lookupSegment))
		}
	})
	write("contacts.csv", func(w *bufio.Writer) {
		fmt.Fprintln(w, plainTables[1].header)
		for i := range ids {
			if i%lookupSegment > 0 {
				fmt.Fprintf(w, "%d,%d,0.95,10000\n", ids[i-1], ids[i])
			}
		}
	})
	for _, t := range plainTables[2:] {
		write(t.file, func(w *bufio.Writer) { fmt.Fprintln(w, t.header) })
	}
}

// plainLookups fills what of-select compares with.
func plainLookups(b *testing.B, pool *pgxpool.Pool, ids []ledger.ID) {
	b.Helper()
	if _, err := pool.Exec(b.Context(), `create table plain_lookup (id bigint, segment_id bigint)`); err != nil {
		b.Fatal(err)
	}
	_, err := pool.CopyFrom(b.Context(), pgx.Identifier{"plain_lookup"}, []string{"id", "segment_id"},
		pgx.CopyFromSlice(len(ids), func(i int) ([]any, error) { return []any{int64(ids[i]), int64(i / lookupSegment)}, nil }))
	if err != nil {
		b.Fatal(err)
	}
	for _, sql := range []string{`create index on plain_lookup (id)`, `vacuum analyze plain_lookup`} {
		if _, err := pool.Exec(b.Context(), sql); err != nil {
			b.Fatal(err)
		}
	}
}

func selectAll(b *testing.B, pool *pgxpool.Pool, asked []ledger.ID) time.Duration {
	b.Helper()
	plain := make([]int64, len(asked))
	for i, id := range asked {
		plain[i] = int64(id)
	}
	began := time.Now()
	found := make(map[int64]int64, len(plain))
	for i := 0; i < len(plain); i += lookupBatch {
		rows, err := pool.Query(b.Context(), `select id, segment_id from plain_lookup where id = any($1)`, plain[i:i+lookupBatch])
		if err != nil {
			b.Fatal(err)
		}
		var id, segment int64
		if _, err := pgx.ForEachRow(rows, []any{&id, &segment}, func() error { found[id] = segment; return nil }); err != nil {
			b.Fatal(err)
		}
	}
	return time.Since(began)
}
