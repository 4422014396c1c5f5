package tasks

import (
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/uuid"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger"
)

func TestASecondPersonReviews(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(2, 10), place(1, 20))
	one := b.end(birch, b.take(birch), Unclear) // birch is a reviewer as well
	two := b.end(alder, b.take(alder), Sound)
	for _, tt := range []struct {
		who  Person
		want []int64
	}{{birch, []int64{two.Number}}, {cedar, []int64{one.Number, two.Number}}, {rowan, []int64{one.Number, two.Number}}} {
		list, err := b.ToReview(t.Context(), b.name, tt.who, 10)
		if diff := cmp.Diff(tt.want, numbersOf(list)); err != nil || diff != "" {
			t.Errorf("%s reviews: %v %s", tt.who.Handle, err, diff)
		}
	}
	_, err := b.ToReview(t.Context(), b.name, alder, 10)
	want(t, err, fault.Forbidden, "role-missing")
	_, _, err = b.Review(t.Context(), b.name, one.Number, birch, Accept, "")
	want(t, err, fault.Forbidden, "review-own")
	_, _, err = b.Review(t.Context(), b.name, one.Number, cedar, "maybe", "")
	want(t, err, fault.Invalid, "verdict-unknown")

	done, _, err := b.Review(t.Context(), b.name, one.Number, cedar, Accept, "so it is")
	if err != nil || done.State != Accepted || done.Review.Person != "cedar" || done.Review.Note != "so it is" {
		t.Errorf("%+v %v", done.Review, err)
	}
	again, _, err := b.Review(t.Context(), b.name, one.Number, cedar, Accept, "")
	if diff := cmp.Diff(done, again); err != nil || diff != "" {
		t.Errorf("the same again: %v %s", err, diff)
	}
	_, _, err = b.Review(t.Context(), b.name, one.Number, rowan, Return, "")
	want(t, err, fault.Conflict, "task-not-resolved")
}

func TestAnOpenTaskCannotBeReviewed(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(2, 10))
	_, _, err := b.Review(t.Context(), b.name, 1, cedar, Accept, "")
	want(t, err, fault.Conflict, "task-not-resolved")
	_, _, err = b.Review(t.Context(), b.name, 2, cedar, Accept, "")
	want(t, err, fault.NotFound, "task-unknown")
}

func TestAReturnedOutcomeOpensThePlaceAgain(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(2, 10), place(1, 10))
	b.end(alder, b.take(alder), Sound)
	b.judge(cedar, 1, Return)
	again := b.take(birch)
	if old := b.read(1); old.State != Returned || again.Number != 3 || again.Key != old.Key || again.ID == old.ID {
		t.Errorf("old %+v\nagain %+v", old, again)
	}
}

func TestAReturnedCorrectionIsReversed(t *testing.T) {
	t.Parallel()
	f := newField(t)
	bridge := found("bridge 17 24", 8, twins)
	f.finds(bridge)
	task, split := f.corrects(alder, f.take(alder), apart())
	f.finds()
	done, reversal, err := f.Review(t.Context(), f.name, task.Number, cedar, Return, "they are one")
	if err != nil {
		t.Fatal(err)
	}
	if done.State != Returned || done.Review.Reversal != 2 || reversal.Reverses != split.Position || reversal.Person != "cedar" || reversal.Reason != "they are one" {
		t.Errorf("%+v\n%+v", done.Review, reversal)
	}
	again, e, err := f.Review(t.Context(), f.name, task.Number, cedar, Return, "they are one")
	if err != nil || e.Position != 2 || again.State != Returned || f.head() != 2 {
		t.Errorf("the same again: %+v %v", again, err)
	}
	// Triage sees the place again, and it is a new task.
	bridge.Segments = reversal.After
	f.finds(bridge)
	if anew := f.take(birch); anew.Number != 2 || anew.Key != task.Key {
		t.Errorf("anew: %+v", anew)
	}
}

func TestACorrectionThatOthersBuiltOnIsNotReturned(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("tips 33 34", 8, half, other))
	task, merge := f.corrects(alder, f.take(alder), together())
	later := f.posts(birch, &ledger.Draft{Expected: merge.After, Split: &ledger.Split{Groups: [][]ledger.ID{{33}, {34}}}})
	last := f.posts(birch, &ledger.Draft{Expected: later.After, Merge: &ledger.Merge{A: 32, B: 35}})
	_, _, err := f.Review(t.Context(), f.name, task.Number, cedar, Return, "")
	want(t, err, fault.Conflict, "later-entries")
	if f.read(task.Number).State != Resolved || f.head() != last.Position {
		t.Error("something happened")
	}
	// Once those are undone it can be.
	for _, e := range []ledger.Entry{last, later} {
		touched, err := undone(t.Context(), f.v, e.Position)
		if err != nil {
			t.Fatal(err)
		}
		f.posts(rowan, &ledger.Draft{Expected: touched, Reversal: &ledger.Reversal{Position: e.Position}})
	}
	if _, _, err := f.Review(t.Context(), f.name, task.Number, cedar, Return, ""); err != nil {
		t.Error(err)
	}
}

// Somebody reversed the correction before the review: the review then names that reversal.
func TestAReturnAfterTheReversal(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("bridge 17 24", 8, twins))
	task, split := f.corrects(alder, f.take(alder), apart())
	undo := f.posts(rowan, &ledger.Draft{Expected: split.After, Reversal: &ledger.Reversal{Position: split.Position}})
	done, e, err := f.Review(t.Context(), f.name, task.Number, cedar, Return, "")
	if err != nil || e.ID != undo.ID || done.Review.Reversal != undo.Position {
		t.Errorf("%+v %+v %v", done.Review, e, err)
	}
}

// Whoever reviews may undo an entry outside of a task too; whoever only posts may not.
func TestWhoUndoes(t *testing.T) {
	t.Parallel()
	f := newField(t)
	split := f.posts(alder, &ledger.Draft{Expected: []ledger.ID{twins}, Split: apart().Split})
	undo := ledger.Draft{ID: uuid.Must(uuid.NewV7()), Expected: split.After, Reversal: &ledger.Reversal{Position: split.Position}}
	_, err := f.Post(t.Context(), f.name, alder, undo)
	want(t, err, fault.Forbidden, "role-missing")
	if e, err := f.Post(t.Context(), f.name, cedar, undo); err != nil || e.Reverses != split.Position {
		t.Errorf("%+v %v", e, err)
	}
}

func TestNobodyReturnsWhatAnotherIsLookingAt(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("bridge 17 24", 8, twins))
	task, split := f.corrects(alder, f.take(alder), apart())
	f.finds(found("size", 4, split.After[0]))
	f.take(birch)
	_, _, err := f.Review(t.Context(), f.name, task.Number, cedar, Return, "")
	want(t, err, fault.Conflict, "segment-held")
}
