package tasks

import (
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/uuid"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger"
)

func TestACorrectionCommitsWithItsEntry(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("bridge 17 24", 8, twins))
	task := f.take(alder)
	task, e := f.corrects(alder, task, apart())
	if task.State != Resolved || task.Resolution.Outcome != Corrected || task.Resolution.Position != 1 {
		t.Errorf("the task: %+v %+v", task, task.Resolution)
	}
	if e.Position != 1 || e.Person != "alder" || *e.Task != task.ID || e.Kind != ledger.KindSplit {
		t.Errorf("the entry: %+v", e)
	}
	// The same request again gets the same answer, and nothing is posted twice.
	again, e2, err := f.Resolve(t.Context(), alder, task.Claim.ID, Resolve{Outcome: Corrected, Draft: apart()})
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(task, again); diff != "" || e2.ID != e.ID || f.head() != 1 {
		t.Errorf("again: %s, entry %v, head %d", diff, e2.ID, f.head())
	}
	// With another outcome it is too late.
	_, _, err = f.Resolve(t.Context(), alder, task.Claim.ID, Resolve{Outcome: Sound})
	want(t, err, fault.Gone, "claim-ended")
}

func TestSoundAndUnclearNeedNoEntry(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(2, 10), place(1, 20))
	for _, outcome := range []string{Sound, Unclear} {
		task := b.take(alder)
		r := Resolve{Outcome: outcome, Note: "looked twice"}
		done, e, err := b.Resolve(t.Context(), alder, task.Claim.ID, r)
		if err != nil || e != nil {
			t.Fatal(e, err)
		}
		if got := done.Resolution; got.Outcome != outcome || got.Note != "looked twice" || got.Person != "alder" {
			t.Errorf("%+v", got)
		}
		if diff := cmp.Diff(done, b.read(task.Number)); diff != "" {
			t.Errorf("-answered +read afterwards\n%s", diff)
		}
		again, _, err := b.Resolve(t.Context(), alder, task.Claim.ID, r)
		if diff := cmp.Diff(done, again); err != nil || diff != "" {
			t.Errorf("again: %v %s", err, diff)
		}
	}
}

func TestAnOutcomeHasToMakeSense(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(1, 10))
	task := b.take(alder)
	for _, tt := range []struct {
		r    Resolve
		code string
	}{
		{Resolve{Outcome: "done"}, "outcome-unknown"},
		{Resolve{Outcome: Corrected}, "correction-missing"},
		{Resolve{Outcome: Corrected, Draft: &ledger.Draft{Reversal: &ledger.Reversal{Position: 1}}}, "correction-missing"},
		{Resolve{Outcome: Sound, Draft: apart()}, "correction-unexpected"},
		{Resolve{Outcome: Sound, Note: strings.Repeat("ä", 2001)}, "note-long"},
	} {
		_, _, err := b.Resolve(t.Context(), alder, task.Claim.ID, tt.r)
		want(t, err, fault.Invalid, tt.code)
	}
	_, _, err := b.Resolve(t.Context(), alder, uuid.New(), Resolve{Outcome: Sound})
	want(t, err, fault.NotFound, "claim-unknown")
	_, _, err = b.Resolve(t.Context(), cedar, task.Claim.ID, Resolve{Outcome: Sound})
	want(t, err, fault.Forbidden, "role-missing")
}

// Whoever has looked at segments that changed in the meantime is told what they are now, and keeps the task.
func TestACorrectionOfRetiredSegmentsIsRefused(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("tips 33 34", 8, half, other))
	task := f.take(alder)
	e, err := f.v.Post(t.Context(), ledger.Draft{ID: newID(t), Person: "birch", Expected: []ledger.ID{half, orphan},
		Merge: &ledger.Merge{A: 33, B: 18446744073709551615}}) // past the queue, as a reversal may be
	if err != nil {
		t.Fatal(err)
	}
	_, _, err = f.Resolve(t.Context(), alder, task.Claim.ID, Resolve{Outcome: Corrected, Draft: together()})
	want(t, err, fault.Retired, "segment-retired")
	d := together()
	d.Expected = []ledger.ID{e.After[0], other}
	done, entry := f.corrects(alder, task, d)
	if done.State != Resolved || entry.Position != 2 {
		t.Errorf("%+v %+v", done, entry)
	}
}

func TestACorrectionHasToDoWithItsTask(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("bridge 17 24", 8, twins))
	task := f.take(alder)
	_, _, err := f.Resolve(t.Context(), alder, task.Claim.ID, Resolve{Outcome: Corrected, Draft: together()})
	want(t, err, fault.Conflict, "correction-elsewhere")
	if f.head() != 0 || f.read(task.Number).State != Claimed {
		t.Errorf("head %d, task %s", f.head(), f.read(task.Number).State)
	}
}

// The entry and the end of the claim are one: when the claim has ended, nothing is posted.
func TestAnOversleptCorrectionPostsNothing(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("bridge 17 24", 8, twins))
	task := f.take(alder)
	f.oversleep(task)
	if _, err := f.Expire(t.Context()); err != nil {
		t.Fatal(err)
	}
	_, _, err := f.Resolve(t.Context(), alder, task.Claim.ID, Resolve{Outcome: Corrected, Draft: apart()})
	want(t, err, fault.Gone, "claim-ended")
	// And the companion would have refused it, had the claim ended a moment later.
	d := *apart()
	d.ID, d.Person = newID(t), "alder"
	_, err = f.v.Post(t.Context(), d, ledger.Companion{SQL: `select from claim_resolve($1, 'alder', 'corrected', '', $2, $3)`,
		Args: func(position int64) []any { return []any{task.Claim.ID, position, d.Expected} }})
	if err == nil || f.head() != 0 {
		t.Errorf("posted: %v, head %d", err, f.head())
	}
}

// Nor is just any entry the one that corrected a task.
func TestTheDatabaseWantsTheEntryOfTheTask(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("bridge 17 24", 8, twins))
	task := f.take(alder)
	e := f.posts(birch, together())
	f.refused("task_step", `select claim_resolve($1, 'alder', 'corrected', '', $2, $3)`, task.Claim.ID, e.Position, []ledger.ID{twins})
}

func TestNobodyCorrectsWhatAnotherIsLookingAt(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("tips 33", 8, half), found("bridge 17 24", 6, twins))
	task := f.take(alder)
	d := together()
	d.ID = newID(t)
	_, err := f.Post(t.Context(), f.name, rowan, *d)
	want(t, err, fault.Conflict, "segment-held")
	if x, _ := fault.As(err); x.Data["person"] != "alder" {
		t.Errorf("who holds it: %v", x.Data)
	}
	mine := f.take(birch)
	d = &ledger.Draft{Expected: []ledger.ID{half, twins}, Merge: &ledger.Merge{A: 33, B: 24}}
	_, _, err = f.Resolve(t.Context(), birch, mine.Claim.ID, Resolve{Outcome: Corrected, Draft: d})
	want(t, err, fault.Conflict, "segment-held")
	// Alder may, also outside of the task; and an overslept claim stops nobody.
	f.oversleep(task)
	f.posts(rowan, together())
	_, err = f.Post(t.Context(), f.name, cedar, *together())
	want(t, err, fault.Forbidden, "role-missing")
}
