package tasks

import (
	"testing"

	"github.com/google/go-cmp/cmp"

	"fettle.example/fettle/internal/fault"
)

func TestAssignedTasksComeFirstAndAreNobodyElses(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(4, 10), place(3, 20), place(2, 30), place(1, 40))
	n, err := b.Assign(t.Context(), b.name, rowan, "alder", []int64{3, 4})
	if n != 2 || err != nil {
		t.Fatal(n, err)
	}
	for _, want := range []int64{3, 4, 1} {
		task := b.take(alder)
		if task.Number != want {
			t.Errorf("alder got %d, want %d", task.Number, want)
		}
		if want != 3 {
			b.end(alder, task, Sound)
			continue
		}
		// Released, it is still alder's.
		b.release(alder, task)
		if again := b.take(alder); again.Number != 3 {
			t.Errorf("alder got %d", again.Number)
		} else {
			b.end(alder, again, Sound)
		}
	}
	if _, err := b.Assign(t.Context(), b.name, rowan, "alder", []int64{2}); err != nil {
		t.Fatal(err)
	}
	_, err = b.Claim(t.Context(), b.name, birch, ClaimOptions{ID: newID(t)})
	want(t, err, fault.NotFound, "queue-empty")
	_, err = b.Claim(t.Context(), b.name, birch, ClaimOptions{ID: newID(t), Task: 2})
	want(t, err, fault.Conflict, "task-assigned")
}

func TestOnlyALeadAssignsAndOnlyToProofreaders(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(4, 10))
	assign := func(lead Person, to string, numbers ...int64) error {
		return first(b.Assign(t.Context(), b.name, lead, to, numbers))
	}
	want(t, assign(alder, "alder", 1), fault.Forbidden, "role-missing")
	want(t, assign(rowan, "cedar", 1), fault.Conflict, "assignee-role")
	want(t, assign(rowan, "oak", 1), fault.NotFound, "person-unknown")
	want(t, assign(rowan, "alder", 1, 7), fault.NotFound, "task-unknown")
}

func TestAssigningLeavesAloneWhatIsNotOpen(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(4, 10), place(3, 20))
	b.take(birch)
	n, err := b.Assign(t.Context(), b.name, rowan, "alder", []int64{1, 2})
	if n != 1 || err != nil || b.read(1).AssignedTo != "" || b.read(2).AssignedTo != "alder" {
		t.Errorf("assigned %d: %v", n, err)
	}
}

func TestAssignTheBestOfAKind(t *testing.T) {
	t.Parallel()
	split := place(5, 50)
	split.Kind = "false-split"
	b := newBench(t, split, place(4, 10), place(3, 20), place(2, 30))
	numbers, err := b.AssignBest(t.Context(), b.name, rowan, "alder", 2, "false-merge", "")
	if diff := cmp.Diff([]int64{2, 3}, numbers); err != nil || diff != "" {
		t.Errorf("%v %s", err, diff)
	}
	list, _, err := b.List(t.Context(), b.name, Filter{AssignedTo: "alder"})
	if diff := cmp.Diff([]int64{2, 3}, numbersOf(list)); err != nil || diff != "" {
		t.Errorf("%v %s", err, diff)
	}
}

// An assigned task stands aside from the lines: its absent owner stops nobody, and a segment still is in one person's
// hands only.
func TestAnAssignedTaskBlocksNobody(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(4, 10), place(3, 10), place(2, 10))
	if _, err := b.Assign(t.Context(), b.name, rowan, "alder", []int64{1}); err != nil {
		t.Fatal(err)
	}
	birchs := b.take(birch)
	if birchs.Number != 2 {
		t.Errorf("birch got %d", birchs.Number)
	}
	_, err := b.Claim(t.Context(), b.name, alder, ClaimOptions{ID: newID(t), Task: 1})
	want(t, err, fault.Conflict, "segment-held")
	_, err = b.Claim(t.Context(), b.name, alder, ClaimOptions{ID: newID(t)})
	want(t, err, fault.NotFound, "queue-empty")
	b.release(birch, birchs)
	if mine := b.take(alder); mine.Number != 1 {
		t.Errorf("alder got %d", mine.Number)
	}
	// Now the line waits for alder.
	if diff := cmp.Diff([]int{0, 1, 1}, b.waits()); diff != "" {
		t.Errorf("waits: %s", diff)
	}
	_, err = b.Claim(t.Context(), b.name, birch, ClaimOptions{ID: newID(t)})
	want(t, err, fault.NotFound, "queue-empty")
}

func TestUnassignedTasksGoBackToTheirPlaces(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(4, 10, 20), place(3, 10), place(2, 20))
	if _, err := b.Assign(t.Context(), b.name, rowan, "alder", []int64{1, 3}); err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff([]int{0, 0, 0}, b.waits()); diff != "" {
		t.Errorf("assigned: %s", diff)
	}
	n, err := b.Unassign(t.Context(), b.name, rowan, []int64{1, 2, 3})
	if diff := cmp.Diff([]int{0, 1, 1}, b.waits()); n != 2 || err != nil || diff != "" {
		t.Errorf("unassigned %d: %v %s", n, err, diff)
	}
}
