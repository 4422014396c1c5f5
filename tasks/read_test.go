package tasks

import (
	"testing"

	"github.com/google/go-cmp/cmp"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

func TestListFiltersAndPages(t *testing.T) {
	t.Parallel()
	var places []triage.Place
	for i := range 25 {
		p := place(float64(i/5), ledger.ID(100+i)) // five of each priority
		if i%2 == 1 {
			p.Family, p.Kind = "tips", "false-split"
		}
		places = append(places, p)
	}
	b := newBench(t, places...)
	var got []int64
	f := Filter{Limit: 4}
	for pages := 0; ; pages++ {
		page, next, err := b.List(t.Context(), b.name, f)
		if err != nil || pages > 10 {
			t.Fatal(pages, err)
		}
		got = append(got, numbersOf(page)...)
		if next == "" {
			break
		}
		f.Cursor = next
	}
	want1to25 := make([]int64, 25)
	for i := range want1to25 {
		want1to25[i] = int64(i + 1)
	}
	if diff := cmp.Diff(want1to25, got); diff != "" {
		t.Errorf("all, best first: %s", diff)
	}

	mine := b.take(alder)
	b.end(birch, b.take(birch), Sound)
	seg := mine.Segments[0]
	for name, tt := range map[string]struct {
		f Filter
		n int
	}{
		"state":   {Filter{State: Claimed}, 1},
		"kind":    {Filter{Kind: "false-split"}, 12},
		"family":  {Filter{Family: "bridge"}, 13},
		"holder":  {Filter{Person: "alder"}, 1},
		"ended":   {Filter{Person: "birch", State: Resolved}, 1},
		"segment": {Filter{Segment: &seg}, 1},
		"nothing": {Filter{AssignedTo: "alder"}, 0},
	} {
		if page, _, err := b.List(t.Context(), b.name, tt.f); err != nil || len(page) != tt.n {
			t.Errorf("%s: %d tasks, want %d: %v", name, len(page), tt.n, err)
		}
	}
	_, _, err := b.List(t.Context(), b.name, Filter{Cursor: "somewhere"})
	want(t, err, fault.Invalid, "cursor-malformed")
}

func TestHistoryTellsEverything(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(1, 10))
	if _, err := b.Assign(t.Context(), b.name, rowan, "alder", []int64{1}); err != nil {
		t.Fatal(err)
	}
	task := b.take(alder)
	if _, err := b.Extend(t.Context(), alder, task.Claim.ID); err != nil {
		t.Fatal(err)
	}
	b.release(alder, task)
	task = b.take(alder)
	b.oversleep(task)
	if _, err := b.Expire(t.Context()); err != nil {
		t.Fatal(err)
	}
	if _, err := b.Unassign(t.Context(), b.name, rowan, []int64{1}); err != nil {
		t.Fatal(err)
	}
	b.end(birch, b.take(birch), Unclear)
	b.judge(rowan, 1, Return)
	events, err := b.History(t.Context(), b.name, 1)
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	for _, e := range events {
		got = append(got, e.Person+" "+e.What+" "+e.Note)
	}
	if diff := cmp.Diff([]string{
		" made ", "rowan assigned alder", "alder claimed ", "alder extended ", "alder released later", "alder claimed ",
		"alder expired ", "rowan unassigned ", "birch claimed ", "birch resolved unclear", "rowan returned ",
	}, got); diff != "" {
		t.Errorf("-want +got\n%s", diff)
	}
	_, err = b.History(t.Context(), b.name, 77)
	want(t, err, fault.NotFound, "task-unknown")
}

func TestStatusOfAQueue(t *testing.T) {
	t.Parallel()
	split := place(1, 30)
	split.Kind, split.Family = "false-split", "tips"
	b := newBench(t, place(4, 10), place(3, 10), place(2, 20), split, place(0.5, 40))
	b.take(alder)
	if _, err := b.Assign(t.Context(), b.name, rowan, "birch", []int64{3}); err != nil {
		t.Fatal(err)
	}
	s, err := b.Status(t.Context(), b.name)
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(map[string]int{Open: 4, Claimed: 1}, s.States); diff != "" {
		t.Errorf("states: %s", diff)
	}
	if diff := cmp.Diff([]OpenKind{
		{Kind: "false-merge", Family: "bridge", Tasks: 3, Ready: 1, Assigned: 1, Minutes: 6, Gain: 11},
		{Kind: "false-split", Family: "tips", Tasks: 1, Ready: 1, Minutes: 2, Gain: 2},
	}, s.Open); diff != "" {
		t.Errorf("open: %s", diff)
	}
	if s.Minutes != 8 || len(s.Holders) != 1 || s.Holders[0].Person != "alder" || s.Holders[0].Task != 1 || s.Lag != 0 {
		t.Errorf("%+v", s)
	}
}
