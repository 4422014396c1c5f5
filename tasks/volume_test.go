package tasks

import (
	"context"
	"encoding/json"
	"testing"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/ledger/ledgertest"
	"fettle.example/fettle/triage"
)

// The volume of testdata/deliveries/tiny, which its README draws. Cells 1 and 2 are one segment, falsely joined between
// 17 and 24; the two halves of cell 3 are two.
const (
	twins  ledger.ID = 9223372036854775809
	half   ledger.ID = 300
	other  ledger.ID = 301
	orphan ledger.ID = 18446744073709551614
)

// field is a queue on a real volume. Triage is the test itself: finds says what it finds.
type field struct {
	*bench
	v *ledger.Volume
}

func newField(t testing.TB) *field {
	t.Helper()
	led, pool := ledgertest.New(t, "../testdata/deliveries/tiny")
	v := ledgertest.Open(t, led, "tiny")
	addTeam(t, pool)
	t.Cleanup(func() { checkInvariants(t, pool) })
	return &field{bench: &bench{Queue: NewQueue(led, pool), t: t, volume: v.ID(), name: v.Name()}, v: v}
}

// found is a finding about some segments.
func found(key string, worth float64, segments ...ledger.ID) triage.Finding {
	return triage.Finding{Detector: "bridge", Family: "bridge", Kind: triage.FalseMerge, Key: key, Segments: segments, Said: "a thin bridge",
		Probability: 0.5, Moves: worth, Gain: worth / 2, Point: base.Point{1e5 * worth, 0, 0}} // far apart, so that each is a place
}

// finds makes these the current findings, with triage at the head of the ledger, and has the queue follow.
func (f *field) finds(findings ...triage.Finding) {
	f.t.Helper()
	err := pg.InTx(f.t.Context(), f.pool, func(ctx context.Context, tx pgx.Tx) error {
		if _, err := tx.Exec(ctx, `update finding set retired = made where retired is null`); err != nil {
			return err
		}
		for _, x := range findings {
			evidence, err := json.Marshal(x.Evidence)
			if err != nil {
				return err
			}
			if _, err := tx.Exec(ctx, `
				insert into finding (volume_id, detector, family, kind, place, segments, point_nm, evidence, said, probability, moves, gain, made)
				values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, 0)`,
				f.volume, x.Detector, x.Family, x.Kind, x.Key, x.Segments, x.Point[:], evidence, x.Said, x.Probability, x.Moves, x.Gain); err != nil {
				return err
			}
		}
		_, err := tx.Exec(ctx, `
			insert into follower (volume_id, name, position) select volume_id, 'triage', position from head where volume_id = $1
			on conflict (volume_id, name) do update set position = excluded.position`, f.volume)
		return err
	})
	if err != nil {
		f.t.Fatal(err)
	}
	f.catchUp()
}

func (f *field) catchUp() {
	f.t.Helper()
	head, err := f.v.Head(f.t.Context())
	if err != nil {
		f.t.Fatal(err)
	}
	if p, err := f.Follow(f.t.Context(), f.v); err != nil || p != head {
		f.t.Fatalf("followed to %d of %d: %v", p, head, err)
	}
}

// apart is the split of the twins where they were falsely joined.
func apart() *ledger.Draft {
	return &ledger.Draft{Expected: []ledger.ID{twins}, Split: &ledger.Split{Groups: [][]ledger.ID{{17}, {24}}}}
}

// together is the merge of the two halves of cell 3.
func together() *ledger.Draft {
	return &ledger.Draft{Expected: []ledger.ID{half, other}, Merge: &ledger.Merge{A: 33, B: 34}}
}

// posts posts outside of any task, or fails.
func (f *field) posts(p Person, d *ledger.Draft) ledger.Entry {
	f.t.Helper()
	d.ID = uuid.Must(uuid.NewV7())
	e, err := f.Post(f.t.Context(), f.name, p, *d)
	if err != nil {
		f.t.Fatal(err)
	}
	return e
}

// corrects resolves a task with its correction, or fails.
func (f *field) corrects(p Person, task Task, d *ledger.Draft) (Task, ledger.Entry) {
	f.t.Helper()
	task, e, err := f.Resolve(f.t.Context(), p, task.Claim.ID, Resolve{Outcome: Corrected, Draft: d})
	if err != nil {
		f.t.Fatal(err)
	}
	return task, *e
}

func (f *field) head() int64 {
	f.t.Helper()
	head, err := f.v.Head(f.t.Context())
	if err != nil {
		f.t.Fatal(err)
	}
	return head
}

// named claims a task by its number, or fails.
func (f *field) named(p Person, number int64) Task {
	f.t.Helper()
	task, err := f.Claim(f.t.Context(), f.name, p, ClaimOptions{ID: newID(f.t), Task: number})
	if err != nil {
		f.t.Fatal(err)
	}
	return task
}

// slips posts past the queue, as if nobody held anything.
func (f *field) slips(p Person, d *ledger.Draft) ledger.Entry {
	f.t.Helper()
	d.ID, d.Person = newID(f.t), p.Handle
	e, err := f.v.Post(f.t.Context(), *d)
	if err != nil {
		f.t.Fatal(err)
	}
	return e
}
