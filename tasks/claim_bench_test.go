package tasks

import (
	"context"
	"fmt"
	"math/rand/v2"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

const (
	benchTasks    = 100_000
	benchClaimers = 40
	benchWindow   = time.Second
)

// BenchmarkClaim has 40 people claim and resolve (as sound) the best of 100,000 open tasks, each of one to three
// segments. The metric of-skiplocked is cycles a second over those of a bare queue of as many rows, in windows between
// ours: one UPDATE with SKIP LOCKED to claim, one to complete, no segments, no people, no history.
//
//   - uniform: segments drawn from 40,000 alike;
//   - skewed: 40,000·u³, so that the commonest is on about 3 % of the tasks;
//   - hot: the 50,000 best tasks all touch one of 30 segments, fewer than there are claimers.
func BenchmarkClaim(b *testing.B) {
	const segments = 40_000
	uniform := func(r *rand.Rand, _ int) int { return 1000 + r.IntN(segments) }
	for name, draw := range map[string]func(r *rand.Rand, task int) int{
		"uniform": uniform,
		"skewed": func(r *rand.Rand, _ int) int {
			u := r.Float64()
			return 1000 + int(segments*u*u*u)
		},
		"hot": func(r *rand.Rand, task int) int {
			if task < benchTasks/2 {
				return r.IntN(30)
			}
			return uniform(r, task)
		},
	} {
		b.Run(name, func(b *testing.B) {
			bn := newBenchOn(b, pgtest.NewDurable(b))
			r := rand.New(rand.NewPCG(1, 2))
			places := make([]triage.Place, benchTasks)
			for i := range places {
				set := map[int]bool{draw(r, i): true}
				for len(set) < 1+i%3 {
					set[uniform(r, i)] = true
				}
				var ids []ledger.ID
				for s := range set {
					ids = append(ids, ledger.ID(s))
				}
				places[i] = place(float64(benchTasks-i), ids...)
			}
			bn.add(places...)
			bare := newBareQueue(b, bn.pool)
			if _, err := bn.pool.Exec(b.Context(), `analyze`); err != nil {
				b.Fatal(err)
			}
			people := make([]Person, benchClaimers)
			for i := range people {
				people[i] = Person{Handle: fmt.Sprintf("tree-%d", i), Roles: []Role{Proofreader}}
				if _, err := NewPeople(bn.pool).Add(b.Context(), Operator, people[i].Handle, people[i].Roles); err != nil {
					b.Fatal(err)
				}
			}
			cycle := func(ctx context.Context, i int) error {
				task, err := bn.Claim(ctx, ganglion, people[i], ClaimOptions{ID: uuid.Must(uuid.NewV7())})
				if err != nil {
					return err
				}
				_, _, err = bn.Resolve(ctx, people[i], task.Claim.ID, Resolve{Outcome: Sound})
				return err
			}
			least := rate(b, bare.cycle)
			var ours, ratio float64
			for b.Loop() {
				now := rate(b, cycle)
				b.StopTimer()
				after := rate(b, bare.cycle)
				b.StartTimer()
				ours += now
				ratio += now / ((least + after) / 2)
				least = after
			}
			b.ReportMetric(ours/float64(b.N), "cycles/s")
			b.ReportMetric(ratio/float64(b.N), "of-skiplocked")
		})
	}
}

// rate has every claimer go round and round for a window, and returns cycles a second.
func rate(b *testing.B, cycle func(ctx context.Context, claimer int) error) float64 {
	b.Helper()
	var n atomic.Int64
	var wg sync.WaitGroup
	start := time.Now()
	for i := range benchClaimers {
		wg.Go(func() {
			for time.Since(start) < benchWindow {
				if err := cycle(b.Context(), i); err != nil {
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

// bareQueue is the least that a queue in PostgreSQL can be.
type bareQueue struct{ pool *pgxpool.Pool }

func newBareQueue(b *testing.B, pool *pgxpool.Pool) bareQueue {
	b.Helper()
	_, err := pool.Exec(b.Context(), `
		create table bare (id bigint primary key, priority double precision not null, state int not null default 0, body bytea not null);
		create index bare_open on bare (priority desc, id) where state = 0;`)
	if err != nil {
		b.Fatal(err)
	}
	if _, err := pool.Exec(b.Context(), `
		insert into bare (id, priority, body) select i, -i, decode(repeat('00', 127), 'hex') from generate_series(1, $1) i`, benchTasks); err != nil {
		b.Fatal(err)
	}
	return bareQueue{pool}
}

func (q bareQueue) cycle(ctx context.Context, _ int) error {
	var id int64
	err := q.pool.QueryRow(ctx, `
		update bare set state = 1
		 where id = (select id from bare where state = 0 order by priority desc, id for update skip locked limit 1) returning id`).Scan(&id)
	if err != nil {
		return err
	}
	_, err = q.pool.Exec(ctx, `update bare set state = 2 where id = $1`, id)
	return err
}
