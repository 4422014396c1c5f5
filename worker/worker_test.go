package worker_test

import (
	"context"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/synth"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
	"fettle.example/fettle/migrations"
	"fettle.example/fettle/tasks"
	"fettle.example/fettle/triage"
	"fettle.example/fettle/worker"
)

// tickInTest is short, so that a test waits little for it.
const tickInTest = 100 * time.Millisecond

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

// reach waits until both followers have read up to a position, looking each time the database says that one has moved.
func reach(t *testing.T, v *ledger.Volume, position int64) {
	t.Helper()
	ctx, cancel := context.WithTimeout(t.Context(), time.Minute)
	defer cancel()
	conn, err := pgx.ConnectConfig(ctx, v.Pool().Config().ConnConfig.Copy())
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(context.WithoutCancel(ctx)) //nolint:errcheck // it ends either way
	if _, err := conn.Exec(ctx, `listen follower_moved`); err != nil {
		t.Fatal(err)
	}
	for {
		var behind bool
		if err := conn.QueryRow(ctx, `
			select count(*) filter (where position >= $2) < 2 from follower where volume_id = $1`, v.ID(), position).Scan(&behind); err != nil {
			t.Fatalf("waiting for position %d: %v", position, err)
		}
		if !behind {
			return
		}
		if _, err := conn.WaitForNotification(ctx); err != nil {
			t.Fatalf("waiting for position %d: %v", position, err)
		}
	}
}

// tellOfFollowers has the database say when a follower moves.
func tellOfFollowers(t *testing.T, pool *pgxpool.Pool) {
	t.Helper()
	if _, err := pool.Exec(t.Context(), `
		create function tell_of_follower() returns trigger language plpgsql as $$
		begin
			notify follower_moved;
			return null;
		end $$;
		create trigger tell_of_follower after insert or update on follower execute function tell_of_follower()`); err != nil {
		t.Fatal(err)
	}
}

// loseWakeUps cancels whatever job an entry's NOTIFY would start, before it can run.
func loseWakeUps(t *testing.T, pool *pgxpool.Pool) {
	t.Helper()
	if _, err := pool.Exec(t.Context(), `
		create function lose_wake_up() returns trigger language plpgsql as $$
		begin
			new.state := 'cancelled';
			new.finalized_at := now();
			return new;
		end $$;
		create trigger lose_wake_up before insert on `+migrations.JobSchema+`.river_job
		   for each row when (new.kind = '`+worker.FollowArgs{}.Kind()+`') execute function lose_wake_up()`); err != nil {
		t.Fatal(err)
	}
}

func volume(t *testing.T) (*ledger.Ledger, *pgxpool.Pool, *ledger.Volume) {
	dir := t.TempDir()
	if _, err := synth.WriteTiny(dir, 5, 60); err != nil {
		t.Fatal(err)
	}
	led, pool := ledgertest.New(t)
	tellOfFollowers(t, pool)
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

// TestALostWakeUpCostsATick loses every wake-up, and posts after the look at the start, so that only a tick can find the entry.
func TestALostWakeUpCostsATick(t *testing.T) {
	led, pool, v := volume(t)
	loseWakeUps(t, pool)
	start(t, led, pool, tickInTest)
	reach(t, v, 0)
	e := merge(t, v)
	reach(t, v, e.Position)
}
