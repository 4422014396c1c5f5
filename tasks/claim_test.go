package tasks

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"sync"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"github.com/google/uuid"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

func TestTheBestTaskComesFirst(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(1, 10), place(3, 30), place(2, 20))
	for _, want := range []float64{3, 2, 1} {
		task := b.take(alder)
		if task.Priority != want || task.State != Claimed || task.Claim.Person != "alder" {
			t.Errorf("got %+v, want priority %g", task, want)
		}
		b.end(alder, task, Sound)
	}
	_, err := b.Claim(t.Context(), ganglion, alder, ClaimOptions{ID: newID(t)})
	want(t, err, fault.NotFound, "queue-empty")
}

func TestAClaimTellsAllThatATaskHolds(t *testing.T) {
	t.Parallel()
	p := triage.Place{
		Key: "bridge 1 2", Family: "bridge", Kind: "false-merge", Segments: []ledger.ID{1 << 63, 7}, Point: [3]float64{10, 20, 30},
		Findings: []triage.Finding{{Detector: "bridge", Key: "bridge 1 2", Said: "thin", Segments: []ledger.ID{7},
			Evidence: []triage.Evidence{{Name: "affinity", Value: 0.55}}}},
		Proposal:    &triage.Proposal{Kind: "split", Groups: [][]ledger.ID{{1<<53 + 1}, {1<<64 - 1}}},
		Probability: 0.5, Gain: 12, Minutes: 3, Priority: 4, Said: "a thin bridge",
	}
	b := newBench(t, p)
	claimed := b.take(alder)
	got := claimed.place()
	p.Segments = []ledger.ID{7, 1 << 63}
	if diff := cmp.Diff(p, got); diff != "" {
		t.Errorf("-made +claimed\n%s", diff)
	}
	if diff := cmp.Diff(claimed, b.read(claimed.Number)); diff != "" {
		t.Errorf("-claimed +read afterwards\n%s", diff)
	}
	if lease := claimed.Claim.Until.Sub(claimed.Claim.At); lease != DefaultLease {
		t.Errorf("the lease is %v", lease)
	}
}

func TestOnlyProofreadersClaim(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(1, 10))
	_, err := b.Claim(t.Context(), ganglion, cedar, ClaimOptions{ID: newID(t)})
	want(t, err, fault.Forbidden, "role-missing")
	_, err = b.Claim(t.Context(), "atlantis", alder, ClaimOptions{ID: newID(t)})
	want(t, err, fault.NotFound, "volume-unknown")
	_, err = b.Claim(t.Context(), ganglion, alder, ClaimOptions{})
	want(t, err, fault.Invalid, "claim-id")
	stranger := Person{Handle: "oak", Roles: []Role{Proofreader}}
	_, err = b.Claim(t.Context(), ganglion, stranger, ClaimOptions{ID: newID(t)})
	want(t, err, fault.NotFound, "person-unknown")
}

func TestOneTaskAPerson(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(2, 20), place(1, 10))
	first := b.take(alder)
	_, err := b.Claim(t.Context(), ganglion, alder, ClaimOptions{ID: newID(t)})
	want(t, err, fault.Conflict, "claim-held")
	held, err := b.Held(t.Context(), ganglion, alder)
	if err != nil || len(held) != 1 || held[0].Number != first.Number {
		t.Errorf("held: %v %v", held, err)
	}
	// A claim that ran out holds nobody back, even before the program has noticed.
	b.oversleep(first)
	second := b.take(alder)
	if second.Claim.ID == first.Claim.ID {
		t.Error("the same claim again")
	}
}

func TestTheSameClaimAgainGetsTheSameAnswer(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(2, 20))
	opt := ClaimOptions{ID: newID(t)}
	first, err := b.Claim(t.Context(), ganglion, alder, opt)
	if err != nil {
		t.Fatal(err)
	}
	again, err := b.Claim(t.Context(), ganglion, alder, opt) // the queue is empty by now
	if diff := cmp.Diff(first, again); err != nil || diff != "" {
		t.Errorf("%v\n%s", err, diff)
	}
	opt.Task = first.Number // and named
	again, err = b.Claim(t.Context(), ganglion, alder, opt)
	if diff := cmp.Diff(first, again); err != nil || diff != "" {
		t.Errorf("%v\n%s", err, diff)
	}
	_, err = b.Claim(t.Context(), ganglion, birch, opt)
	want(t, err, fault.Conflict, "claim-id-taken")
	b.end(alder, first, Sound)
	_, err = b.Claim(t.Context(), ganglion, alder, opt)
	want(t, err, fault.Gone, "claim-ended")
}

func TestAClaimCanAskForAKindOrFamily(t *testing.T) {
	t.Parallel()
	size := place(9, 10)
	size.Family = "size"
	split := place(8, 20)
	split.Kind = "false-split"
	b := newBench(t, size, split, place(7, 30))
	for _, tt := range []struct {
		opt  ClaimOptions
		want float64
	}{
		{ClaimOptions{Kinds: []string{"false-split"}}, 8},
		{ClaimOptions{Families: []string{"bridge"}, Kinds: []string{"false-merge"}}, 7},
		{ClaimOptions{Families: []string{"size", "bridge"}}, 9},
	} {
		tt.opt.ID = newID(t)
		task, err := b.Claim(t.Context(), ganglion, alder, tt.opt)
		if err != nil || task.Priority != tt.want {
			t.Errorf("%+v: %v %v", tt.opt, task.Priority, err)
		}
		b.release(alder, task)
	}
	_, err := b.Claim(t.Context(), ganglion, alder, ClaimOptions{ID: newID(t), Families: []string{"tips"}})
	want(t, err, fault.NotFound, "queue-empty")
}

// The lines: a segment's tasks come one after the other, best first.
func TestTasksOfASegmentStandInALine(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(4, 10), place(3, 10, 20), place(2, 20), place(1, 30)) // numbers 1 to 4
	if diff := cmp.Diff([]int{0, 1, 1, 0}, b.waits()); diff != "" {
		t.Errorf("waits: %s", diff)
	}
	first := b.take(alder)
	other := b.take(birch)
	if first.Number != 1 || other.Number != 4 {
		t.Errorf("claimed %d and %d, want 1 and 4: 2 and 3 wait", first.Number, other.Number)
	}
	_, err := b.Claim(t.Context(), ganglion, b.hire("elm"), ClaimOptions{ID: newID(t)})
	want(t, err, fault.NotFound, "queue-empty")
	b.end(alder, first, Sound)
	if second := b.take(alder); second.Number != 2 {
		t.Errorf("after task 1 came %d, want 2", second.Number)
	}
}

func TestANamedTaskIsClaimedOrRefusedWithAReason(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(4, 10), place(3, 10, 20), place(2, 20), place(1, 30))
	claim := func(p Person, number int64) error {
		_, err := b.Claim(t.Context(), ganglion, p, ClaimOptions{ID: newID(t), Task: number})
		return err
	}
	want(t, claim(alder, 99), fault.NotFound, "task-unknown")
	err := claim(alder, 3)
	want(t, err, fault.Conflict, "task-waits")
	f, _ := fault.As(err)
	if diff := cmp.Diff([]int64{2}, f.Data["before"]); diff != "" {
		t.Errorf("who comes first: %s", diff)
	}
	if err := claim(alder, 1); err != nil {
		t.Fatal(err)
	}
	want(t, claim(birch, 1), fault.Conflict, "task-not-open")
	want(t, claim(birch, 2), fault.Conflict, "segment-held")
	if err := claim(birch, 4); err != nil {
		t.Fatal(err)
	}
}

func TestAReleasedTaskGoesBackToItsPlace(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(4, 10), place(2, 10))
	task := b.take(alder)
	b.add(place(6, 10), place(3, 10)) // numbers 3 and 4, while 1 is claimed
	if _, err := b.Claim(t.Context(), ganglion, birch, ClaimOptions{ID: newID(t)}); fault.CodeOf(err) != "queue-empty" {
		t.Errorf("the segment is in use: %v", err)
	}
	open := b.release(alder, task)
	if open.State != Open || open.Claim != nil {
		t.Errorf("released: %+v", open)
	}
	for _, want := range []int64{3, 1, 4, 2} { // in order of priority
		task := b.take(birch)
		if task.Number != want {
			t.Errorf("got task %d, want %d", task.Number, want)
		}
		b.end(birch, task, Sound)
	}
	// Releasing again changes nothing, and a claim that ended otherwise says so.
	if _, err := b.Release(t.Context(), alder, task.Claim.ID, "again"); err != nil {
		t.Error(err)
	}
	_, err := b.Extend(t.Context(), alder, task.Claim.ID)
	want(t, err, fault.Gone, "claim-ended")
}

// The fence: what an overslept claim was about belongs to somebody else by now.
func TestAnOversleptClaimCannotTouchItsSuccessor(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(1, 10))
	old := b.take(alder)
	if n, err := b.Expire(t.Context()); n != 0 || err != nil {
		t.Fatalf("nothing has run out yet: %d %v", n, err)
	}
	b.oversleep(old)
	if n, err := b.Expire(t.Context()); n != 1 || err != nil {
		t.Fatalf("expired %d %v", n, err)
	}
	now := b.take(birch)
	if now.Number != old.Number {
		t.Fatalf("birch got %d", now.Number)
	}
	for what, err := range map[string]error{
		"resolve": second(b.Resolve(t.Context(), alder, old.Claim.ID, Resolve{Outcome: Sound})),
		"release": first(b.Release(t.Context(), alder, old.Claim.ID, "")),
		"extend":  first(b.Extend(t.Context(), alder, old.Claim.ID)),
	} {
		if fault.KindOf(err) != fault.Gone || fault.CodeOf(err) != "claim-ended" {
			t.Errorf("%s: %v", what, err)
		}
	}
	// Nor can alder use birch's claim.
	for what, err := range map[string]error{
		"resolve": second(b.Resolve(t.Context(), alder, now.Claim.ID, Resolve{Outcome: Sound})),
		"release": first(b.Release(t.Context(), alder, now.Claim.ID, "")),
		"extend":  first(b.Extend(t.Context(), alder, now.Claim.ID)),
	} {
		if fault.KindOf(err) != fault.Forbidden {
			t.Errorf("%s: %v", what, err)
		}
	}
	if got := b.read(now.Number); got.State != Claimed || got.Claim.Person != "birch" {
		t.Errorf("birch's task: %+v", got)
	}
	b.end(birch, now, Unclear)
}

func TestAnExtendedClaimIsNotExpired(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(1, 10))
	task := b.take(alder)
	b.oversleep(task)
	c, err := b.Extend(t.Context(), alder, task.Claim.ID) // late, but nobody has noticed
	if err != nil || c.Until.Before(time.Now().Add(DefaultLease-time.Minute)) {
		t.Errorf("%+v %v", c, err)
	}
	if n, err := b.Expire(t.Context()); n != 0 || err != nil {
		t.Errorf("expired %d %v", n, err)
	}
}

// A task on a segment that an entry has just retired is not handed out until the queue has followed.
func TestATaskOnARetiredSegmentIsNotHandedOut(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(2, 10), place(1, 20))
	if _, err := b.pool.Exec(t.Context(), `
		insert into segment (volume_id, segment_id, grp, born, retired, supervoxels, voxels, synapses_in, synapses_out, nuclei, bounds_nm)
		values ($1, 10, 0, 0, 1, 1, 1, 0, 0, 0, '{0,0,0,1,1,1}')`, b.volume); err != nil {
		t.Fatal(err)
	}
	_, err := b.Claim(t.Context(), ganglion, alder, ClaimOptions{ID: newID(t), Task: 1})
	want(t, err, fault.Conflict, "task-settling")
	if task := b.take(alder); task.Number != 2 {
		t.Errorf("got task %d", task.Number)
	}
}

// Forty people, a thousand tasks on few segments: nobody gets what another has, and nothing is left.
func TestFortyClaimersShareNothing(t *testing.T) {
	t.Parallel()
	for name, segments := range map[string]int{"wide": 400, "narrow": 12} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			const people, tasks = 40, 400
			r := rand.New(rand.NewPCG(7, uint64(segments)))
			places := make([]triage.Place, tasks)
			for i := range places {
				var ids []ledger.ID
				for range 1 + r.IntN(3) {
					ids = append(ids, ledger.ID(r.IntN(segments)))
				}
				places[i] = place(float64(r.IntN(50)), ids...)
				places[i].Key = fmt.Sprint("place ", i)
			}
			b := newBench(t, places...)
			var mu sync.Mutex
			held, done := make(map[ledger.ID]string), make(map[int64]int)
			work := func(ctx context.Context, p Person) error {
				task, err := b.Claim(ctx, ganglion, p, ClaimOptions{ID: uuid.Must(uuid.NewV7())})
				if err != nil {
					return err
				}
				mu.Lock()
				for _, s := range task.Segments {
					if other := held[s]; other != "" {
						t.Errorf("segment %d is in the hands of %s and %s", s, other, p.Handle)
					}
					held[s] = p.Handle
				}
				mu.Unlock()
				if _, err := b.Extend(ctx, p, task.Claim.ID); err != nil {
					return err
				}
				mu.Lock()
				for _, s := range task.Segments {
					delete(held, s)
				}
				done[task.Number]++
				twice := done[task.Number] > 1
				mu.Unlock()
				if task.Number%10 == 0 && !twice {
					_, err = b.Release(ctx, p, task.Claim.ID, "not now")
				} else {
					_, _, err = b.Resolve(ctx, p, task.Claim.ID, Resolve{Outcome: Sound})
				}
				return err
			}
			var wg sync.WaitGroup
			for i := range people {
				p := b.hire(fmt.Sprintf("tree-%d", i))
				wg.Go(func() {
					for {
						switch err := work(t.Context(), p); {
						case fault.CodeOf(err) == "queue-empty":
							if b.left() == 0 {
								return
							}
						case err != nil:
							t.Error(err)
							return
						}
					}
				})
			}
			wg.Wait()
			if len(done) != tasks {
				t.Errorf("%d of %d tasks were done", len(done), tasks)
			}
		})
	}
}

// Someone who has the only claim to a task twice at once gets it once.
func TestTwoRepeatsAtOnceAreOneClaim(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(2, 20), place(1, 10))
	opt := ClaimOptions{ID: newID(t)}
	var wg sync.WaitGroup
	got := make([]Task, 8)
	errs := make([]error, len(got))
	for i := range got {
		wg.Go(func() { got[i], errs[i] = b.Claim(t.Context(), ganglion, alder, opt) })
	}
	wg.Wait()
	if err := errors.Join(errs...); err != nil {
		t.Fatal(err)
	}
	for _, task := range got {
		if task.Number != 1 {
			t.Errorf("got task %d", task.Number)
		}
	}
}

// With three segments under all of the best tasks, three people at a time have them, in order, and the rest goes on
// with others.
func TestHotSegmentsAreWorkedOffInOrder(t *testing.T) {
	t.Parallel()
	var places []triage.Place
	for i := range 300 {
		places = append(places, place(float64(1000-i), ledger.ID(1+i%3)))
	}
	for i := range 20 {
		places = append(places, place(1, ledger.ID(100+i)))
	}
	b := newBench(t, places...)
	var now []Task
	people := []Person{b.hire("ash"), b.hire("elm"), b.hire("fir"), b.hire("oak")}
	for _, p := range people {
		now = append(now, b.take(p))
	}
	if diff := cmp.Diff([]int64{1, 2, 3, 301}, numbersOf(now)); diff != "" {
		t.Errorf("first round: %s", diff)
	}
	for next := int64(4); next <= 300; next++ {
		i := int(next-1) % 3
		b.end(people[i], now[i], Sound)
		if now[i] = b.take(people[i]); now[i].Number != next {
			t.Fatalf("after %d came %d", next-1, now[i].Number)
		}
	}
}
