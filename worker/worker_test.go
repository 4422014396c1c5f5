package worker_test

import (
	"context"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/synth"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
	"fettle.example/fettle/tasks"
	"fettle.example/fettle/triage"
	"fettle.example/fettle/worker"
)

func start(t *testing.T, led *ledger.Ledger, pool *pgxpool.Pool, tick time.Duration) {
	t.Helper()
	w, err := worker.New(worker.Config{Pool: pool, Ledger: led, Queue: tasks.NewQueue(led, pool), Tick: tick})
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Start(t.Context()); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		ctx, cancel := context.WithTimeout(context.Background(), 30*time.Second)
		defer cancel()
		if err := w.Stop(ctx); err != nil {
			t.Error(err)
		}
	})
}

// reach waits until both followers have read up to a position, looking each time the database changes what they have read.
func reach(t *testing.T, v *ledger.Volume, position int64) {
	t.Helper()
	ctx, cancel := context.WithTimeout(t.Context(), time.Minute)
	defer cancel()
	for {
		var behind bool
		if err := v.Pool().QueryRow(ctx, `
			select count(*) filter (where position >= $2) < 2 from follower where volume_id = $1`, v.ID(), position).Scan(&behind); err != nil {
			t.Fatalf("waiting for position %d: %v", position, err)
		}
		if !behind {
			return
		}
		if _, err := v.Pool().Exec(ctx, `select pg_sleep(0.02)`); err != nil {
			t.Fatalf("waiting for position %d: %v", position, err)
		}
	}
}

func volume(t *testing.T) (*ledger.Ledger, *pgxpool.Pool, *ledger.Volume) {
	dir := t.TempDir()
	if _, err := synth.WriteTiny(dir, 5, 60); err != nil {
		t.Fatal(err)
	}
	led, pool := ledgertest.New(t)
	return led, pool, ledgertest.Open(t, led, ledgertest.Import(t, pool, dir))
}

// merge joins two neighbouring base segments.
func merge(t *testing.T, v *ledger.Volume) ledger.Entry {
	t.Helper()
	places, err := triage.Places(t.Context(), v.Pool(), v, nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, p := range places {
		if p.Proposal != nil && p.Proposal.Kind == triage.ProposeMerge {
			e, err := v.Post(t.Context(), ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "alder", Reason: "one neurite",
				Expected: p.Segments, Merge: &ledger.Merge{A: p.Proposal.A, B: p.Proposal.B}})
			if err != nil {
				t.Fatal(err)
			}
			return e
		}
	}
	t.Fatal("triage proposes no merge in this volume")
	return ledger.Entry{}
}

func TestAnEntryIsFollowedByFindingsAndTasks(t *testing.T) {
	led, pool, v := volume(t)
	start(t, led, pool, time.Hour) // so that only the alarm clock can wake it
	reach(t, v, 0)                 // the first look is at the start
	e := merge(t, v)
	reach(t, v, e.Position)
	var stale int
	if err := pool.QueryRow(t.Context(), `
		select count(*) from finding where retired is null and segments && $1`, e.Before).Scan(&stale); err != nil || stale != 0 {
		t.Errorf("%d findings name retired segments, %v", stale, err)
	}
	if err := pool.QueryRow(t.Context(), `
		select count(*) from task where state = 'open' and segments && $1`, e.Before).Scan(&stale); err != nil || stale != 0 {
		t.Errorf("%d open tasks name retired segments, %v", stale, err)
	}
}

// TestALostWakeUpCostsATick posts while nobody listens.
func TestALostWakeUpCostsATick(t *testing.T) {
	led, pool, v := volume(t)
	if err := triage.Full(t.Context(), v, nil); err != nil {
		t.Fatal(err)
	}
	e := merge(t, v)
	start(t, led, pool, 100*time.Millisecond)
	reach(t, v, e.Position)
}
