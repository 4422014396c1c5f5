package ledger_test

import (
	"errors"
	"strings"
	"testing"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
	"fettle.example/fettle/ledger/proof"
)

func (d *desk) checkpoint() ledger.Checkpoint {
	d.Helper()
	c, err := d.volume.Checkpoint(d.Context())
	if err != nil {
		d.Fatal(err)
	}
	return c
}

// TestCheckpointsVouchForEveryEntry checks what an auditor would: signatures, that the tree grows, and that entries are in it.
func TestCheckpointsVouchForEveryEntry(t *testing.T) {
	d := newDesk(t)
	if _, err := d.volume.LastCheckpoint(t.Context()); fault.CodeOf(err) != "checkpoint-none" {
		t.Fatalf("none was made: %v", err)
	}
	older := d.checkpoint()
	if older.Size != 0 || older.Root != proof.Hash(proof.Root(nil)) {
		t.Errorf("the empty ledger's checkpoint is %+v", older)
	}
	var entries []ledger.Entry
	for i := range 5 {
		entries = append(entries, d.post(d.merge(d.ids[i], d.ids[i+1])))
		newer := d.checkpoint()
		p, err := d.volume.ProveGrowth(t.Context(), older.Size, newer.Size)
		if err != nil {
			t.Fatal(err)
		}
		if err := proof.CheckConsistency(p.Path, older.Size, newer.Size, older.Root, newer.Root); err != nil {
			t.Error(err)
		}
		older = newer
	}
	if again := d.checkpoint(); again != older {
		t.Errorf("nothing was posted, and yet %+v became %+v", older, again)
	}
	for _, e := range entries {
		p, err := d.volume.ProveEntry(t.Context(), e.Position, 0)
		if err != nil {
			t.Fatal(err)
		}
		if err := proof.CheckInclusion(p.Path, e.Position-1, older.Size, proof.LeafHash(e.Content), older.Root); err != nil {
			t.Error(err)
		}
	}
	if _, err := d.volume.ProveEntry(t.Context(), 6, 0); fault.CodeOf(err) != "position-unknown" {
		t.Errorf("entry 6 of 5: %v", err)
	}
	if _, err := d.volume.ProveGrowth(t.Context(), 1, 6); fault.CodeOf(err) != "size-outside" {
		t.Errorf("a tree that is not yet: %v", err)
	}
}

// TestProcessesShareTheKey opens the volume twice: both sign alike, and the key is the one that is shown.
func TestProcessesShareTheKey(t *testing.T) {
	d := newDesk(t)
	key, err := d.volume.PublicKey(t.Context())
	if err != nil || !strings.HasPrefix(key, proof.Origin(d.volume.Name())+"+") {
		t.Fatal(key, err)
	}
	other := ledgertest.Open(t, ledger.New(d.pool), d.volume.Name())
	if again, err := other.PublicKey(t.Context()); err != nil || again != key {
		t.Errorf("%s, then %s, %v", key, again, err)
	}
	d.post(d.merge(d.ids[0], d.ids[1]))
	made := d.checkpoint()
	seen, err := other.Checkpoint(t.Context())
	if err != nil || seen != made {
		t.Errorf("%+v and %+v, %v", made, seen, err)
	}
}

// TestARewrittenLedgerIsNotSigned changes an entry as somebody who owns the database and takes the trigger away can.
func TestARewrittenLedgerIsNotSigned(t *testing.T) {
	d := newDesk(t)
	e := d.post(d.merge(d.ids[0], d.ids[1]))
	d.checkpoint()
	rewrite := func(leaf [32]byte) {
		if _, err := d.pool.Exec(t.Context(), `alter table entry disable trigger entry_is_final`); err != nil {
			t.Fatal(err)
		}
		if _, err := d.pool.Exec(t.Context(), `update entry set leaf_hash = $1 where position = 1`, leaf[:]); err != nil {
			t.Fatal(err)
		}
	}
	rewrite(proof.LeafHash([]byte("another story")))
	_, err := d.volume.Checkpoint(t.Context())
	d.refused(err, fault.Conflict, "ledger-rewritten")
	rewrite(e.Leaf)
	d.checkpoint()
}

func TestCheckpointsAreFinal(t *testing.T) {
	d := newDesk(t)
	d.checkpoint()
	for _, sql := range []string{`update checkpoint set size = 7`, `delete from checkpoint`, `truncate checkpoint`,
		`update checkpoint_key set seed = sha256('x')`, `delete from checkpoint_key`} {
		if _, err := d.pool.Exec(t.Context(), sql); pg.Constraint(err) != "checkpoint_is_final" {
			t.Errorf("%s: %v", sql, errors.Unwrap(err))
		}
	}
}
