package ledger_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/google/uuid"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/synth"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/ledger/ledgertest"
)

// TestLedgerAgainstUnionFind posts random merges, splits and reversals on random small volumes and holds, after each entry,
// who is together against a union-find over the pairs that are accepted: it shares no code with the ledger. At the end
// every past position still answers as it did when it was the last.
func TestLedgerAgainstUnionFind(t *testing.T) {
	for seed := uint64(1); seed <= 12; seed++ {
		t.Run(fmt.Sprint(seed), func(t *testing.T) {
			t.Parallel()
			dir := t.TempDir()
			if _, err := synth.WriteTiny(dir, seed, 12+int(seed)*4); err != nil {
				t.Fatal(err)
			}
			led, pool := ledgertest.New(t)
			name := ledgertest.Import(t, pool, dir)
			w := newWalk(t, ledgertest.Open(t, led, name), seed)
			for range 40 {
				w.step()
				w.check()
			}
			w.checkPast(w.volume)
			w.checkPast(ledgertest.Open(t, ledger.New(pool), name)) // as another process sees it
			if w.posted[ledger.KindMerge] == 0 || w.posted[ledger.KindSplit] == 0 || w.posted[ledger.KindReversal] == 0 {
				t.Errorf("the walk posted only %v", w.posted)
			}
		})
	}
}

// walk is a random history of one volume, and the plain model it is held against.
type walk struct {
	t      *testing.T
	rng    *rand.Rand
	volume *ledger.Volume
	ids    []ledger.ID
	pairs  map[pair]int // accepted pairs: contacts and links, with how often
	past   [][]ledger.ID
	posted map[string]int
}

type pair struct {
	a, b ledger.ID
	link bool
}

func newWalk(t *testing.T, v *ledger.Volume, seed uint64) *walk {
	w := &walk{t: t, rng: rand.New(rand.NewPCG(seed, 7)), volume: v, pairs: make(map[pair]int), posted: make(map[string]int)}
	whole, err := v.Base().View(t.Context(), v.Pool(), []base.Range{{Lo: 0, Hi: uint32(v.Info().Supervoxels)}})
	if err != nil {
		t.Fatal(err)
	}
	w.ids = whole.IDs
	for _, c := range whole.Contacts {
		w.pairs[w.pair(whole.IDs[c.A], whole.IDs[c.B], false)]++
	}
	w.past = [][]ledger.ID{w.segments(v, ledger.At{})}
	return w
}

func (w *walk) pair(a, b ledger.ID, link bool) pair {
	if a > b {
		a, b = b, a
	}
	return pair{a, b, link}
}

func (w *walk) segments(v *ledger.Volume, at ledger.At) []ledger.ID {
	w.t.Helper()
	out, err := v.SegmentsOf(w.t.Context(), w.ids, at)
	if err != nil {
		w.t.Fatal(err)
	}
	return out
}

// asMany asks about so many supervoxels at once that all of the past is read, and returns what it says of each.
func (w *walk) asMany(v *ledger.Volume, at ledger.At) []ledger.ID {
	w.t.Helper()
	const many = 600
	var asked []ledger.ID
	for len(asked) < many {
		asked = append(asked, w.ids...)
	}
	out, err := v.SegmentsOf(w.t.Context(), asked, at)
	if err != nil {
		w.t.Fatal(err)
	}
	for i := range out {
		if out[i] != out[i%len(w.ids)] {
			w.t.Fatalf("one supervoxel is in %s and %s", out[i], out[i%len(w.ids)])
		}
	}
	return out[:len(w.ids)]
}

// step posts one random entry. Refusals that the rules ask for are part of the walk.
func (w *walk) step() {
	d := ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "alder", Reason: "walk"}
	now := w.segments(w.volume, ledger.At{})
	i, j := w.rng.IntN(len(w.ids)), w.rng.IntN(len(w.ids))
	kind := w.rng.IntN(4)
	if kind == 1 { // towards a split: the next one in the same segment
		for j = (i + 1) % len(w.ids); now[j] != now[i]; j = (j + 1) % len(w.ids) {
		}
	}
	switch {
	case kind == 0 && len(w.past) > 1:
		position := int64(1 + w.rng.IntN(len(w.past)-1))
		d.Reversal, d.Expected = &ledger.Reversal{Position: position}, w.touched(position, now)
	case now[i] == now[j] && i != j:
		d.Split, d.Expected = &ledger.Split{Groups: [][]ledger.ID{{w.ids[i]}, {w.ids[j]}}}, []ledger.ID{now[i]}
	default:
		d.Merge, d.Expected = &ledger.Merge{A: w.ids[i], B: w.ids[j]}, []ledger.ID{now[i], now[j]}
	}
	e, err := w.volume.Post(w.t.Context(), d)
	if err != nil {
		if k := fault.KindOf(err); k != fault.Conflict && k != fault.Retired {
			w.t.Fatalf("%+v: %v", d, err)
		}
		return
	}
	w.apply(e)
	w.posted[e.Kind]++
	w.past = append(w.past, w.segments(w.volume, ledger.At{}))
	if int(e.Position) != len(w.past)-1 {
		w.t.Fatalf("position %d after %d entries", e.Position, len(w.past)-2)
	}
	w.mustReplay(d, e)
}

// touched is what a person would name who wants an entry undone: the segments that hold the ends of its pairs now.
func (w *walk) touched(position int64, now []ledger.ID) []ledger.ID {
	e, err := w.volume.Entry(w.t.Context(), position)
	if err != nil {
		w.t.Fatal(err)
	}
	var out []ledger.ID
	for _, p := range slices.Concat(e.Joined.Contacts, e.Joined.Links, e.Cut.Contacts, e.Cut.Links) {
		out = append(out, now[slices.Index(w.ids, p[0])], now[slices.Index(w.ids, p[1])])
	}
	slices.Sort(out)
	return slices.Compact(out)
}

// mustReplay sends the same draft again: the answer is the entry that was stored, and nothing is posted.
func (w *walk) mustReplay(d ledger.Draft, e ledger.Entry) {
	w.t.Helper()
	again, err := w.volume.Post(w.t.Context(), d)
	if err != nil || again.Position != e.Position || string(again.Content) != string(e.Content) {
		w.t.Fatalf("sent again: position %d, %v; it was stored at %d", again.Position, err, e.Position)
	}
}

func (w *walk) apply(e ledger.Entry) {
	add := func(list [][2]ledger.ID, link bool, by int) {
		for _, p := range list {
			k := w.pair(p[0], p[1], link)
			if w.pairs[k] += by; w.pairs[k] < 0 {
				w.t.Fatalf("entry %d cuts %v, which was not there", e.Position, k)
			}
		}
	}
	add(e.Joined.Contacts, false, 1)
	add(e.Joined.Links, true, 1)
	add(e.Cut.Contacts, false, -1)
	add(e.Cut.Links, true, -1)
}

// check holds the present segments against the components of the accepted pairs, and each segment's totals against a count.
func (w *walk) check() {
	w.t.Helper()
	parent := make(map[ledger.ID]ledger.ID)
	var find func(x ledger.ID) ledger.ID
	find = func(x ledger.ID) ledger.ID {
		if p, ok := parent[x]; ok && p != x {
			parent[x] = find(p)
			return parent[x]
		}
		return x
	}
	for p, n := range w.pairs {
		if n > 0 {
			parent[find(p.a)] = find(p.b)
		}
	}
	now := w.segments(w.volume, ledger.At{})
	segmentOf, rootOf, size := make(map[ledger.ID]ledger.ID), make(map[ledger.ID]ledger.ID), make(map[ledger.ID]int64)
	for i, id := range w.ids {
		root := find(id)
		if s, ok := segmentOf[root]; ok && s != now[i] {
			w.t.Fatalf("position %d: %s hangs together with segment %s, and is in %s", len(w.past)-1, id, s, now[i])
		}
		if r, ok := rootOf[now[i]]; ok && r != root {
			w.t.Fatalf("position %d: nothing holds %s in segment %s", len(w.past)-1, id, now[i])
		}
		segmentOf[root], rootOf[now[i]] = now[i], root
		size[now[i]]++
	}
	for id, n := range size {
		seg, err := w.volume.Segment(w.t.Context(), id)
		if err != nil || seg.Supervoxels != n || seg.Retired != 0 {
			w.t.Fatalf("segment %s holds %d: %+v %v", id, n, seg, err)
		}
	}
}

// checkPast asks every position again. An id never means two contents.
func (w *walk) checkPast(v *ledger.Volume) {
	w.t.Helper()
	content := make(map[ledger.ID]string)
	for p, want := range w.past {
		got := w.segments(v, ledger.AtPosition(int64(p)))
		if !slices.Equal(got, want) {
			w.t.Errorf("position %d answers otherwise than when it was the last", p)
		}
		if !slices.Equal(w.asMany(v, ledger.AtPosition(int64(p))), want) {
			w.t.Errorf("position %d answers otherwise when it is asked about many", p)
		}
		members := make(map[ledger.ID][]ledger.ID)
		for i, s := range got {
			members[s] = append(members[s], w.ids[i])
		}
		for s, m := range members {
			if was, ok := content[s]; ok && was != fmt.Sprint(m) {
				w.t.Errorf("segment %s held %s, and at position %d %v", s, was, p, m)
			}
			content[s] = fmt.Sprint(m)
		}
	}
	if _, err := v.SegmentsOf(context.Background(), w.ids, ledger.AtPosition(int64(len(w.past)))); fault.KindOf(err) != fault.NotFound {
		w.t.Errorf("a position beyond the head: %v", err)
	}
}
