package tasks

import (
	"testing"

	"fettle.example/fettle/internal/fault"
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
	if fault.CodeOf(err) != "queue-empty" || fault.KindOf(err) != fault.NotFound {
		t.Errorf("an empty queue: %v", err)
	}
}
