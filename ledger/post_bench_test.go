package ledger_test

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
)

// BenchmarkPost posts merges on one volume with 1 and with 40 writers. The metric of-insert is entries a second over bare
// durable single-row INSERTs a second, by as many writers, on the same database, measured before and after.
func BenchmarkPost(b *testing.B) {
	for _, writers := range []int{1, 40} {
		b.Run(fmt.Sprint(writers), func(b *testing.B) {
			pool := pgtest.NewDurable(b)
			chains := newChains(b, pool, writers, b.N/writers+2)
			before := insertRate(b, pool, writers)
			b.ResetTimer()
			start := time.Now()
			var left atomic.Int64
			left.Store(int64(b.N))
			var wg sync.WaitGroup
			for w := range writers {
				wg.Go(func() {
					for left.Add(-1) >= 0 {
						if err := chains.grow(w); err != nil {
							b.Error(err)
							return
						}
					}
				})
			}
			wg.Wait()
			rate := float64(b.N) / time.Since(start).Seconds()
			b.StopTimer()
			after := insertRate(b, pool, writers)
			b.ReportMetric(rate, "entries/s")
			b.ReportMetric(rate/((before+after)/2), "of-insert")
		})
	}
}

// chains are supervoxels that each writer joins one after the other to a segment of its own. With many writers one may
// fall behind and the others take its share, so each has room for three times the mean.
type chains struct {
	volume *ledger.Volume
	length int
	at     []int
	holds  []ledger.ID
}

func newChains(b *testing.B, pool *pgxpool.Pool, writers, share int) *chains {
	c := &chains{length: 3 * share, at: make([]int, writers), holds: make([]ledger.ID, writers)}
	if writers == 1 {
		c.length = share
	}
	dir := b.TempDir()
	write := func(name, text string) {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
			b.Fatal(err)
		}
	}
	n := writers * c.length
	write("volume.json", `{"name":"chains","voxel_nm":[8,8,40],"bounds_nm":{"min":[0,0,0],"max":[1e9,1000,1000]}}`)
	write("contacts.csv", "a_supervoxel_id,b_supervoxel_id,affinity\n")
	write("synapses.csv", "synapse_id,pre_supervoxel_id,post_supervoxel_id,x_nm,y_nm,z_nm,confidence\n")
	write("nuclei.csv", "nucleus_id,supervoxel_id,x_nm,y_nm,z_nm,volume_nm3\n")
	f, err := os.Create(filepath.Join(dir, "supervoxels.csv"))
	if err != nil {
		b.Fatal(err)
	}
	fmt.Fprintln(f, "supervoxel_id,segment_id,voxel_count,x_nm,y_nm,z_nm")
	for i := range n {
		fmt.Fprintf(f, "%d,%d,100,%d,500,500\n", 1+i, 1+i, 10*i)
	}
	if err := f.Close(); err != nil {
		b.Fatal(err)
	}
	c.volume = ledgertest.Open(b, ledger.New(pool), ledgertest.Import(b, pool, dir))
	for w := range writers {
		c.holds[w] = ledger.ID(1 + w*c.length)
	}
	return c
}

func (c *chains) grow(w int) error {
	first := ledger.ID(1 + w*c.length)
	c.at[w]++
	next := first + ledger.ID(c.at[w])
	e, err := c.volume.Post(context.Background(), ledger.Draft{
		ID: uuid.Must(uuid.NewV7()), Person: "alder", Reason: "one neurite", Expected: []ledger.ID{c.holds[w], next},
		Merge: &ledger.Merge{A: first, B: next},
	})
	if err == nil {
		c.holds[w] = e.After[0]
	}
	return err
}

// insertRate is how many rows a second as many writers can insert, each row committed by itself.
func insertRate(b *testing.B, pool *pgxpool.Pool, writers int) float64 {
	b.Helper()
	if _, err := pool.Exec(b.Context(), `create table if not exists bare (
		id bigint generated always as identity primary key, body bytea not null)`); err != nil {
		b.Fatal(err)
	}
	const span = time.Second
	body := make([]byte, 400)
	start := time.Now()
	var n atomic.Int64
	var wg sync.WaitGroup
	for range writers {
		wg.Go(func() {
			for time.Since(start) < span {
				if _, err := pool.Exec(context.Background(), `insert into bare (body) values ($1)`, body); err != nil {
					b.Error(err)
					return
				}
				n.Add(1)
			}
		})
	}
	wg.Wait()
	return float64(n.Load()) / time.Since(start).Seconds()
}
