package ledger

import (
	"fmt"
	"strings"

	"fettle.example/fettle/ledger/base"
)

// Totals is what a segment holds.
type Totals = base.Totals

// Segment is a segment as it is or was.
type Segment struct {
	ID ID
	Totals
	Born    int64 // position that made it, 0 for the delivery
	Retired int64 // position that changed it into others, 0 while it is current

	group int64
}

// plus adds what two disjoint sets of supervoxels hold.
func plus(a, b Totals) Totals {
	t := a
	t.Supervoxels += b.Supervoxels
	t.Voxels += b.Voxels
	t.SynapsesIn += b.SynapsesIn
	t.SynapsesOut += b.SynapsesOut
	t.Nuclei += b.Nuclei
	for i := range t.Min {
		t.Min[i] = min(a.Min[i], b.Min[i])
		t.Max[i] = max(a.Max[i], b.Max[i])
	}
	return t
}

// sum totals some of a view's supervoxels, given as a mark per local index. O(view).
func sum(w *base.View, in func(i int32) bool) Totals {
	var t Totals
	for i := range w.IDs {
		if !in(int32(i)) {
			continue
		}
		p := w.Points[i]
		one := Totals{Supervoxels: 1, Voxels: w.Voxels[i], Min: p, Max: p}
		if t.Supervoxels == 0 {
			t = one
			continue
		}
		t = plus(t, one)
	}
	for _, s := range w.Synapses {
		switch {
		case !in(s.At):
		case s.Out:
			t.SynapsesOut++
		default:
			t.SynapsesIn++
		}
	}
	for _, n := range w.Nuclei {
		if in(n.At) {
			t.Nuclei++
		}
	}
	return t
}

// list writes ids for people.
func list(ids []ID) string {
	if len(ids) == 0 {
		return "nothing"
	}
	words := make([]string, len(ids))
	for i, id := range ids {
		words[i] = fmt.Sprint(uint64(id))
	}
	return strings.Join(words, ", ")
}
