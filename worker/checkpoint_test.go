package worker_test

import (
	"context"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
	"fettle.example/fettle/triage"
)

// TestTheLedgerIsSignedOnASchedule begins with a ledger that nobody has signed: the first look, at the start, does.
func TestTheLedgerIsSignedOnASchedule(t *testing.T) {
	_, pool, v := volume(t)
	if err := triage.Full(t.Context(), v, nil); err != nil {
		t.Fatal(err)
	}
	e := merge(t, v)
	if _, err := pool.Exec(t.Context(), `
		create function tell_of_checkpoint() returns trigger language plpgsql as $$
		begin
			notify checkpoint_made;
			return null;
		end $$;
		create trigger tell_of_checkpoint after insert on checkpoint execute function tell_of_checkpoint()`); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithTimeout(t.Context(), time.Minute)
	defer cancel()
	conn, err := pgx.ConnectConfig(ctx, pool.Config().ConnConfig.Copy())
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(context.WithoutCancel(ctx)) //nolint:errcheck // it ends either way
	if _, err := conn.Exec(ctx, `listen checkpoint_made`); err != nil {
		t.Fatal(err)
	}
	app := ledgertest.AsApplication(t, pool) // so that it is known to be enough
	start(t, ledger.New(app), app, time.Hour)
	if _, err := conn.WaitForNotification(ctx); err != nil {
		t.Fatalf("waiting for a checkpoint: %v", err)
	}
	if c, err := v.LastCheckpoint(ctx); err != nil || c.Size != e.Position {
		t.Errorf("signed %+v, %v", c, err)
	}
}
