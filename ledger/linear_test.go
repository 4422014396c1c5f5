package ledger_test

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"sync"
	"testing"
	"time"

	"github.com/anishathalye/porcupine"
	"github.com/google/uuid"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/synth"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
)

// TestWhatClientsSeeIsOneOrder has clients of two processes merge, split, reverse and read one volume at once, and asks a checker
// of linearizability whether there is one order of all that they did, in which each operation stands between its call and its
// return and saw exactly the ledger at its place. That the content of each position is right is for the reconciliation at the end.
func TestWhatClientsSeeIsOneOrder(t *testing.T) {
	for seed := uint64(1); seed <= 4; seed++ {
		t.Run(fmt.Sprint(seed), func(t *testing.T) {
			t.Parallel()
			dir := t.TempDir()
			if _, err := synth.WriteTiny(dir, seed, 24); err != nil {
				t.Fatal(err)
			}
			led, pool := ledgertest.New(t)
			name := ledgertest.Import(t, pool, dir)
			processes := []*ledger.Volume{ledgertest.Open(t, led, name), ledgertest.Open(t, ledger.New(pool), name)}
			history := work(t, processes, seed)
			past := pastOf(t, ledgertest.Open(t, ledger.New(pool), name))
			if r := porcupine.CheckOperationsTimeout(onePosition(past), history, time.Minute); r != porcupine.Ok {
				t.Errorf("the history of %d operations is %s", len(history), r)
			}
			if lied := slices.Clone(history); porcupine.CheckOperations(onePosition(past), staleRead(lied, past)) {
				t.Error("the checker does not notice a read of the past")
			}
		})
	}
}

// did is an operation and its answer: a read, an entry, or a refusal because the segments it names are not current.
type did struct {
	read     []ledger.ID // what every supervoxel's segment was
	position int64       // of the entry that was posted
	refused  bool        // nothing was
	expected []ledger.ID // segments that the draft named
}

// onePosition is the plain model: the state is a position, a read sees the segments of that position, an entry is posted at the
// next one if the segments it names are current, and refused only if they are not.
func onePosition(past [][]ledger.ID) porcupine.Model {
	return porcupine.Model{
		Init: func() any { return int64(0) },
		Step: func(state, input, _ any) (bool, any) {
			at, d := state.(int64), input.(did)
			now := past[at]
			if d.read != nil {
				return slices.Equal(d.read, now), at
			}
			current := true
			for _, id := range d.expected {
				current = current && slices.Contains(now, id)
			}
			if d.refused {
				return !current, at
			}
			return current && d.position == at+1, d.position
		},
		DescribeOperation: func(input, _ any) string { return fmt.Sprintf("%+v", input) },
	}
}

// staleRead replaces the last read, which is after all entries, by what the first position held.
func staleRead(history []porcupine.Operation, past [][]ledger.ID) []porcupine.Operation {
	last := 0
	for i, op := range history {
		if op.Return > history[last].Return {
			last = i
		}
	}
	history[last].Input = did{read: past[0]}
	return history
}

// pastOf reads every position as a process that has just started sees it, and holds each step against its entry.
func pastOf(t *testing.T, v *ledger.Volume) (past [][]ledger.ID) {
	t.Helper()
	ids := allOf(t, v)
	entries, err := v.Entries(t.Context(), ledger.Filter{})
	if err != nil {
		t.Fatal(err)
	}
	for p := range int64(len(entries) + 1) {
		now, err := v.SegmentsOf(t.Context(), ids, ledger.AtPosition(p))
		if err != nil {
			t.Fatal(err)
		}
		past = append(past, now)
		if p == 0 {
			continue
		}
		e := entries[p-1]
		if gone := without(past[p-1], now); !slices.Equal(gone, slices.Sorted(slices.Values(e.Before))) {
			t.Errorf("position %d retired %v, and its entry says %v", p, gone, e.Before)
		}
		if born := without(now, past[p-1]); !slices.Equal(born, slices.Sorted(slices.Values(e.After))) {
			t.Errorf("position %d made %v, and its entry says %v", p, born, e.After)
		}
	}
	return past
}

// without lists what is in a and not in b, once each and in order.
func without(a, b []ledger.ID) []ledger.ID {
	out := slices.DeleteFunc(slices.Clone(a), func(id ledger.ID) bool { return slices.Contains(b, id) })
	slices.Sort(out)
	return slices.Compact(out)
}

func allOf(t *testing.T, v *ledger.Volume) []ledger.ID {
	t.Helper()
	ords := make([]uint32, v.Info().Supervoxels)
	for i := range ords {
		ords[i] = uint32(i)
	}
	ids, err := v.Base().SupervoxelIDs(t.Context(), v.Pool(), ords)
	if err != nil {
		t.Fatal(err)
	}
	return ids
}

// What work does.
const (
	linearClients = 6
	linearRounds  = 8 // a round is a read and a draft
)

// work lets clients of all processes work at once. In the end each kind of entry has been posted, and a draft refused.
func work(t *testing.T, processes []*ledger.Volume, seed uint64) (history []porcupine.Operation) {
	t.Helper()
	ids, began := allOf(t, processes[0]), time.Now()
	posted := make(map[string]int)
	var mu sync.Mutex
	var wg sync.WaitGroup
	for n := range linearClients {
		c := &client{T: t, n: n, volume: processes[n%len(processes)], ids: ids, rng: rand.New(rand.NewPCG(seed, uint64(n))), began: began, posted: make(map[string]int)}
		wg.Go(func() {
			for range linearRounds {
				if !c.draft(c.look()) {
					break
				}
			}
			mu.Lock()
			defer mu.Unlock()
			history = append(history, c.history...)
			for kind, n := range c.posted {
				posted[kind] += n
			}
		})
	}
	wg.Wait()
	last := &client{T: t, n: linearClients, volume: processes[1], ids: ids, rng: rand.New(rand.NewPCG(seed, 99)), began: began, posted: posted}
	last.rest(history[0].Input.(did).read)
	return append(history, last.history...)
}

// rest works alone until everything has happened at least once, with an old view of the volume where that is wanting, and then reads.
func (c *client) rest(old []ledger.ID) {
	for c.posted[ledger.KindMerge] == 0 || c.posted[ledger.KindSplit] == 0 || c.posted[ledger.KindReversal] == 0 {
		if !c.draft(c.look()) {
			return
		}
	}
	for c.posted["refused"] == 0 {
		if !c.draft(old) {
			return
		}
	}
	c.look()
}

// client is one person at one process.
type client struct {
	*testing.T
	n       int
	volume  *ledger.Volume
	ids     []ledger.ID
	rng     *rand.Rand
	began   time.Time
	mine    *ledger.Entry // the last one it posted, while not reversed
	history []porcupine.Operation
	posted  map[string]int
}

func (c *client) note(call time.Duration, d did) {
	c.history = append(c.history, porcupine.Operation{ClientId: c.n, Input: d, Call: call.Nanoseconds(), Return: time.Since(c.began).Nanoseconds()})
}

func (c *client) look() []ledger.ID {
	call := time.Since(c.began)
	now, err := c.volume.SegmentsOf(c.Context(), c.ids, ledger.At{})
	if err != nil {
		c.Error(err)
		return nil
	}
	c.note(call, did{read: now})
	return now
}

// draft posts something about what it saw.
func (c *client) draft(now []ledger.ID) bool {
	if now == nil {
		return false
	}
	i, k := c.rng.IntN(len(now)), c.rng.IntN(len(now)-1)
	if k >= i {
		k++
	}
	d := ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "alder", Reason: "a try"}
	switch {
	case c.mine != nil && c.rng.IntN(3) == 0:
		d.Reversal, d.Expected, c.mine = &ledger.Reversal{Position: c.mine.Position}, c.mine.After, nil
	case now[i] == now[k]:
		d.Split, d.Expected = &ledger.Split{Groups: [][]ledger.ID{{c.ids[i]}, {c.ids[k]}}}, []ledger.ID{now[i]}
	default:
		d.Merge, d.Expected = &ledger.Merge{A: c.ids[i], B: c.ids[k]}, []ledger.ID{now[i], now[k]}
	}
	call := time.Since(c.began)
	e, err := c.volume.Post(c.Context(), d)
	o := did{position: e.Position, expected: d.Expected}
	switch fault.KindOf(err) {
	case fault.Busy:
		return true // says that nothing was posted
	case fault.Retired, fault.Conflict:
		o.refused = true
		c.posted["refused"]++
	default:
		if err != nil {
			c.Error(err)
			return false
		}
		c.mine = &e
		c.posted[e.Kind]++
	}
	c.note(call, o)
	return true
}
