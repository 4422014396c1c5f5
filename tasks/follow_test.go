package tasks

import (
	"fmt"
	"math/rand/v2"
	"strings"
	"sync"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/uuid"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/triage"
)

func TestEveryPlaceBecomesATask(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("bridge 17 24", 4, twins), found("tips 33 34", 8, half, other))
	list, next, err := f.List(t.Context(), f.name, Filter{State: Open})
	if err != nil || next != "" || len(list) != 2 || list[0].Key != "tips 33 34" || list[0].Number != 1 {
		t.Fatalf("%+v %q %v", list, next, err)
	}
	if got := list[0]; got.Gain != 4 || got.Minutes <= 0 || got.Priority != got.Gain/got.Minutes || len(got.Findings) != 1 {
		t.Errorf("%+v", got)
	}
	if made, err := f.Fill(t.Context(), f.v); made != 0 || err != nil {
		t.Errorf("filled again: %d %v", made, err)
	}
}

// What triage really finds in the volume, and what becomes of it.
func TestTriageFillsTheQueue(t *testing.T) {
	t.Parallel()
	f := newField(t)
	if p, err := f.Follow(t.Context(), f.v); p != nowhere || err != nil {
		t.Fatalf("before triage there is nothing to follow: %d %v", p, err)
	}
	if err := triage.Full(t.Context(), f.v, nil); err != nil {
		t.Fatal(err)
	}
	made, err := f.Fill(t.Context(), f.v)
	if err != nil || made == 0 {
		t.Fatalf("made %d: %v", made, err)
	}
	task := f.take(alder)
	_, e := f.corrects(alder, task, proposed(task))
	if _, err := triage.Follow(t.Context(), f.v); err != nil {
		t.Fatal(err)
	}
	f.catchUp()
	list, _, err := f.List(t.Context(), f.name, Filter{State: Open})
	if err != nil {
		t.Fatal(err)
	}
	for _, open := range list {
		for _, s := range open.Segments {
			if seg, err := f.v.Segment(t.Context(), s); err != nil || seg.Retired != 0 {
				t.Errorf("task %d is about segment %s, which entry %d retired: %v", open.Number, s, e.Position, err)
			}
		}
	}
}

// proposed is the correction that triage proposed for a task.
func proposed(task Task) *ledger.Draft {
	d := &ledger.Draft{Expected: task.Segments}
	if task.Proposal.Kind == ledger.KindMerge {
		d.Merge = &ledger.Merge{A: task.Proposal.A, B: task.Proposal.B}
	} else {
		d.Split = &ledger.Split{Groups: task.Proposal.Groups}
	}
	return d
}

func TestAnEntryOvertakesWhatItAnswered(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("bridge 17 24", 8, twins), found("size", 6, twins), found("tips 33 34", 4, half, other))
	e := f.posts(birch, apart())
	size := found("size", 6, e.After[0])
	f.finds(size, found("tips 33 34", 4, half, other))

	gone, kept := f.read(1), f.read(2)
	if gone.State != Overtaken || kept.State != Open || f.read(3).State != Open {
		t.Errorf("%s, %s, %s", gone.State, kept.State, f.read(3).State)
	}
	if diff := cmp.Diff([]ledger.ID{e.After[0]}, kept.Segments); diff != "" {
		t.Errorf("the other moved: %s", diff)
	}
	history, err := f.History(t.Context(), f.name, 1)
	if err != nil {
		t.Fatal(err)
	}
	last := history[len(history)-1]
	if last.What != "overtaken" || last.Note != "entry 1 by birch" || last.Person != "" {
		t.Errorf("history: %+v", history)
	}
}

func TestAMovedTaskKeepsNumberAssignmentAndClaim(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("a", 8, twins), found("b", 6, twins), found("c", 4, twins))
	if _, err := f.Assign(t.Context(), f.name, rowan, "alder", []int64{2}); err != nil {
		t.Fatal(err)
	}
	mine := f.take(birch) // a
	e := f.posts(birch, apart())
	f.finds(found("a", 8, e.After[0]), found("b", 6, e.After[1]), found("c", 4, e.After[1]))

	a, b, c := f.read(1), f.read(2), f.read(3)
	if a.State != Claimed || a.Claim.ID != mine.Claim.ID || a.Segments[0] != e.After[0] {
		t.Errorf("claimed: %+v %+v", a, a.Claim)
	}
	if b.AssignedTo != "alder" || b.State != Open || b.Segments[0] != e.After[1] {
		t.Errorf("assigned: %+v", b)
	}
	if c.Waits != 0 || c.Segments[0] != e.After[1] {
		t.Errorf("open: %+v", c)
	}
	f.end(birch, a, Sound)
}

func TestAnOvertakenClaimSaysSo(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("bridge 17 24", 8, twins))
	task := f.take(alder)
	f.oversleep(task) // so that birch may post
	f.posts(birch, apart())
	f.finds()
	_, _, err := f.Resolve(t.Context(), alder, task.Claim.ID, Resolve{Outcome: Sound})
	want(t, err, fault.Gone, "claim-ended")
	if err == nil || !strings.Contains(err.Error(), "somebody else's entry") {
		t.Errorf("it should say why: %v", err)
	}
	if got := f.read(1); got.State != Overtaken {
		t.Errorf("the task is %s", got.State)
	}
}

// Two people hold one half each, and somebody merges the halves past both of them.
func TestTwoClaimsThatComeTogether(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("a", 8, half), found("b", 6, other))
	one, two := f.take(alder), f.take(birch)
	d := *together()
	d.ID, d.Person = newID(t), "rowan"
	e, err := f.v.Post(t.Context(), d)
	if err != nil {
		t.Fatal(err)
	}
	f.finds(found("a", 8, e.After...), found("b", 6, e.After...))
	if got := f.read(one.Number); got.State != Claimed || got.Claim.Person != "alder" {
		t.Errorf("the first goes on: %+v", got)
	}
	if got := f.read(two.Number); got.State != Open || got.Waits != 1 {
		t.Errorf("the second waits: %+v", got)
	}
	want(t, first(f.Release(t.Context(), birch, two.Claim.ID, "")), fault.Gone, "claim-ended")
}

func TestAPlaceFoundSoundDoesNotComeBack(t *testing.T) {
	t.Parallel()
	f := newField(t)
	f.finds(found("a", 8, twins), found("b", 6, twins), found("c", 4, twins), found("d", 2, twins))
	f.end(alder, f.take(alder), Sound)
	f.end(alder, f.take(alder), Unclear)
	f.judge(cedar, 2, Accept)
	f.end(alder, f.take(alder), Sound)
	f.judge(cedar, 3, Return)                                     // so c is open again, as task 5
	_, e := f.corrects(alder, f.named(alder, 5), apart())         // which is corrected now
	f.finds(found("a", 8, e.After[0]), found("b", 6, e.After[1]), // both were settled
		found("c", 4, e.After[0]), // a correction that did not help
		found("d", 2, e.After[1]), // not touched yet
		found("e", 1, e.After[0])) // new
	list, _, err := f.List(t.Context(), f.name, Filter{State: Open})
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	for _, task := range list {
		got = append(got, fmt.Sprint(task.Number, " ", task.Key))
	}
	if diff := cmp.Diff([]string{"6 c", "4 d", "7 e"}, got); diff != "" {
		t.Errorf("open: %s", diff)
	}
}

// Findings come together and part as segments change; a place is known by any of them.
func TestAPlaceIsKnownByAnyOfItsFindings(t *testing.T) {
	t.Parallel()
	f := newField(t)
	at := func(x triage.Finding, nm float64) triage.Finding { x.Point = base.Point{nm, 0, 0}; return x }
	f.finds(at(found("a", 8, twins), 0), at(found("b", 6, twins), 500), at(found("far", 4, twins), 1e6))
	if n := f.left(); n != 2 {
		t.Fatalf("%d tasks, want 2: a and b are one place", n)
	}
	e := f.posts(birch, apart())
	// a is gone, and b, which was second, names the place now. far has come to hold c.
	f.finds(at(found("b", 6, e.After[0]), 500), at(found("c", 9, e.After[1]), 1e6), at(found("far", 4, e.After[1]), 1e6))
	if got := f.read(1); got.State != Open || got.Key != "b" {
		t.Errorf("task 1: %+v", got)
	}
	if got := f.read(2); got.State != Open || got.Key != "c" || len(got.Findings) != 2 {
		t.Errorf("task 2: %+v", got)
	}
	if n := f.left(); n != 2 {
		t.Errorf("%d tasks", n)
	}
	// Now both places become one: the older task has it, the other ends.
	e = f.posts(birch, &ledger.Draft{Expected: e.After, Merge: &ledger.Merge{A: 16, B: 25}})
	f.finds(at(found("c", 9, e.After...), 1e6), at(found("b", 6, e.After...), 1e6))
	if one, two := f.read(1), f.read(2); one.State != Overtaken || two.State != Open {
		t.Errorf("%s and %s: task 2 has the place's own key", one.State, two.State)
	}
}

// A queue that follows while people work, and entries that come from all sides: whatever happens, the lines are right
// and nobody shares a segment. (The invariants are checked when the test ends.)
func TestFollowingBesideWork(t *testing.T) {
	t.Parallel()
	f := newField(t)
	segments := []ledger.ID{twins, half, other, orphan}
	var findings []triage.Finding
	for i := range 40 {
		findings = append(findings, found(fmt.Sprint("place ", i), float64(1+i), segments[i%4], segments[(i*i+1)%4]))
	}
	f.finds(findings...)
	var wg sync.WaitGroup
	for i := range 8 {
		p := f.hire(fmt.Sprintf("tree-%d", i))
		wg.Go(func() {
			r := rand.New(rand.NewPCG(3, uint64(i)))
			for range 20 {
				task, err := f.Claim(t.Context(), f.name, p, ClaimOptions{ID: uuid.Must(uuid.NewV7())})
				if fault.CodeOf(err) == "queue-empty" {
					continue
				}
				if err != nil {
					t.Error(err)
					return
				}
				if r.IntN(2) == 0 {
					_, err = f.Release(t.Context(), p, task.Claim.ID, "")
				} else {
					_, _, err = f.Resolve(t.Context(), p, task.Claim.ID, Resolve{Outcome: Sound})
				}
				if err != nil && fault.CodeOf(err) != "claim-ended" {
					t.Error(err)
				}
			}
		})
	}
	e := f.slips(rowan, together())
	for i := range findings {
		for k, s := range findings[i].Segments {
			if s == half || s == other {
				findings[i].Segments[k] = e.After[0]
			}
		}
	}
	f.finds(findings[:30]...)
	if _, err := f.Assign(t.Context(), f.name, rowan, "alder", []int64{1, 5, 9, 13}); err != nil {
		t.Error(err)
	}
	wg.Wait()
	if _, err := f.Unassign(t.Context(), f.name, rowan, []int64{1, 5, 9, 13}); err != nil {
		t.Error(err)
	}
}
