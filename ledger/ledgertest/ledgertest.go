// Package ledgertest gives a test a ledger on a database of its own, and reconciles every volume when the test ends.
//
// It is for the tests of every room that posts entries. What is in the volumes is left to the test: a delivery folder
// of testdata, or one that internal/synth wrote.
package ledgertest

import (
	"context"
	"testing"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
)

// cleanupTimeout bounds the reconciliation at the end of a test.
const cleanupTimeout = time.Minute

// New returns a ledger on a fresh database, with the deliveries imported.
func New(t testing.TB, deliveries ...string) (*ledger.Ledger, *pgxpool.Pool) {
	t.Helper()
	pool := pgtest.New(t)
	for _, dir := range deliveries {
		Import(t, pool, dir)
	}
	led := ledger.New(pool)
	t.Cleanup(func() { Reconcile(t, pool) })
	return led, pool
}

// Volume returns the volume of one delivery, imported into a fresh database.
func Volume(t testing.TB, delivery string) *ledger.Volume {
	t.Helper()
	led, pool := New(t)
	return Open(t, led, Import(t, pool, delivery))
}

// Import reads a delivery and returns the volume's name.
func Import(t testing.TB, pool *pgxpool.Pool, dir string) string {
	t.Helper()
	report, err := base.Import(t.Context(), pool, dir, base.ImportOptions{})
	if err != nil {
		t.Fatalf("import %s: %v", dir, err)
	}
	return report.Info.Name
}

// Open opens a volume by name.
func Open(t testing.TB, led *ledger.Ledger, name string) *ledger.Volume {
	t.Helper()
	v, err := led.Volume(t.Context(), name)
	if err != nil {
		t.Fatalf("open volume %s: %v", name, err)
	}
	return v
}

// Reconcile opens every volume of a database anew, as a process that has just started would, and fails the test when
// one differs from what its base and its entries say.
func Reconcile(t testing.TB, pool *pgxpool.Pool) {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), cleanupTimeout)
	defer cancel()
	led := ledger.New(pool)
	volumes, err := led.Volumes(ctx)
	if err != nil {
		t.Errorf("reconcile: %v", err)
		return
	}
	for _, info := range volumes {
		v, err := led.Volume(ctx, info.Name)
		if err != nil {
			t.Errorf("reconcile %s: %v", info.Name, err)
			continue
		}
		r, err := v.Reconcile(ctx, nil)
		if err != nil {
			t.Errorf("reconcile %s: %v", info.Name, err)
			continue
		}
		for _, d := range r.Differences {
			t.Errorf("reconcile %s at position %d: %s", info.Name, r.Position, d)
		}
	}
}
