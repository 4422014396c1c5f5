package ledger_test

import (
	"errors"
	"fmt"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgconn"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/internal/synth"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
)

// desk is a small volume with a few helpers, so that tests read as what people do.
type desk struct {
	*testing.T
	volume *ledger.Volume
	pool   *pgxpool.Pool
	ids    []ledger.ID // one supervoxel of each of several base segments
}

func newDesk(t *testing.T) *desk {
	dir := t.TempDir()
	if _, err := synth.WriteTiny(dir, 3, 48); err != nil {
		t.Fatal(err)
	}
	led, pool := ledgertest.New(t)
	v := ledgertest.Open(t, led, ledgertest.Import(t, pool, dir))
	d := &desk{T: t, volume: v, pool: pool}
	for n := range v.Base().SegmentCount() {
		ids, err := v.Base().SupervoxelIDs(t.Context(), pool, []uint32{v.Base().Segment(n).Lo})
		if err != nil {
			t.Fatal(err)
		}
		d.ids = append(d.ids, ids[0])
	}
	if len(d.ids) < 6 {
		t.Fatalf("the volume has only %d base segments", len(d.ids))
	}
	return d
}

func (d *desk) segment(of ledger.ID) ledger.ID {
	d.Helper()
	s, err := d.volume.SegmentsOf(d.Context(), []ledger.ID{of}, ledger.At{})
	if err != nil {
		d.Fatal(err)
	}
	return s[0]
}

func (d *desk) merge(a, b ledger.ID) ledger.Draft {
	return ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "alder", Reason: "one neurite",
		Expected: []ledger.ID{d.segment(a), d.segment(b)}, Merge: &ledger.Merge{A: a, B: b}}
}

func (d *desk) reversal(position int64, expected ...ledger.ID) ledger.Draft {
	return ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "rowan", Reason: "returned", Expected: expected,
		Reversal: &ledger.Reversal{Position: position}}
}

func (d *desk) post(dr ledger.Draft) ledger.Entry {
	d.Helper()
	e, err := d.volume.Post(d.Context(), dr)
	if err != nil {
		d.Fatal(err)
	}
	return e
}

func (d *desk) refused(err error, kind fault.Kind, code string) *fault.Error {
	d.Helper()
	f, ok := fault.As(err)
	if !ok || f.Kind != kind || f.Code != code {
		d.Fatalf("got %v, want %s %s", err, kind, code)
	}
	return f
}

func TestStaleIDsAreAnsweredWithTheCurrentOnes(t *testing.T) {
	d := newDesk(t)
	late := d.merge(d.ids[2], d.ids[0])
	first := d.post(d.merge(d.ids[0], d.ids[1]))
	second := d.post(d.merge(d.ids[2], d.ids[3]))
	_, err := d.volume.Post(t.Context(), late)
	f := d.refused(err, fault.Retired, "segment-retired")
	current := f.Data["current"].([]ledger.ID)
	if !slices.Contains(current, d.segment(d.ids[0])) || !slices.Contains(current, d.segment(d.ids[2])) {
		t.Errorf("current ids are %v", current)
	}
	changes := f.Data["entries"].([]ledger.Change)
	if len(changes) != 2 || changes[0].Position != first.Position || changes[1].Position != second.Position {
		t.Errorf("the entries between are %+v", changes)
	}
	if !strings.Contains(f.Message, "alder") {
		t.Errorf("the message does not say who: %q", f.Message)
	}
}

func TestRefusals(t *testing.T) {
	d := newDesk(t)
	e := d.post(d.merge(d.ids[0], d.ids[1]))
	draft := func(change func(*ledger.Draft)) ledger.Draft {
		dr := d.merge(d.ids[2], d.ids[3])
		change(&dr)
		return dr
	}
	for _, c := range []struct {
		name  string
		draft ledger.Draft
		kind  fault.Kind
		code  string
	}{
		{"no kind", draft(func(x *ledger.Draft) { x.Merge = nil }), fault.Invalid, "draft-kind"},
		{"two kinds", draft(func(x *ledger.Draft) { x.Reversal = &ledger.Reversal{Position: 1} }), fault.Invalid, "draft-kind"},
		{"nobody", draft(func(x *ledger.Draft) { x.Person = "" }), fault.Invalid, "draft-person"},
		{"no id", draft(func(x *ledger.Draft) { x.ID = uuid.Nil }), fault.Invalid, "draft-id"},
		{"long reason", draft(func(x *ledger.Draft) { x.Reason = strings.Repeat("x", 2001) }), fault.Invalid, "draft-reason"},
		{"nothing expected", draft(func(x *ledger.Draft) { x.Expected = nil }), fault.Invalid, "expected-missing"},
		{"another expected", draft(func(x *ledger.Draft) { x.Expected[0] = d.segment(d.ids[4]) }), fault.Conflict, "expected-other"},
		{"too many expected", draft(func(x *ledger.Draft) { x.Expected = append(x.Expected, d.segment(d.ids[4])) }), fault.Conflict, "expected-other"},
		{"never a segment", draft(func(x *ledger.Draft) { x.Expected[0] = 12345 }), fault.NotFound, "segment-unknown"},
		{"unknown supervoxel", draft(func(x *ledger.Draft) { x.Merge.A = 12345 }), fault.NotFound, "supervoxel-unknown"},
		{"joined already", d.merge(d.ids[0], d.ids[1]), fault.Conflict, "already-joined"},
		{"unknown position", d.reversal(99, e.After[0]), fault.NotFound, "position-unknown"},
		{"three groups", draft(func(x *ledger.Draft) { x.Merge, x.Split = nil, &ledger.Split{Groups: [][]ledger.ID{{1}, {2}, {3}}} }), fault.Invalid, "split-groups"},
		{"an empty group", draft(func(x *ledger.Draft) { x.Merge, x.Split = nil, &ledger.Split{Groups: [][]ledger.ID{{d.ids[0]}, {}}} }), fault.Invalid, "split-group-empty"},
		{"seeds of two segments", draft(func(x *ledger.Draft) {
			x.Merge, x.Split = nil, &ledger.Split{Groups: [][]ledger.ID{{d.ids[0]}, {d.ids[4]}}}
		}), fault.Conflict, "split-segments"},
		{"one seed in both groups", ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "alder", Expected: []ledger.ID{d.segment(d.ids[0])},
			Split: &ledger.Split{Groups: [][]ledger.ID{{d.ids[0]}, {d.ids[0]}}}}, fault.Invalid, "split-seed-both"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := d.volume.Post(t.Context(), c.draft)
			if f, ok := fault.As(err); !ok || f.Kind != c.kind || f.Code != c.code {
				t.Errorf("got %v (%s %s), want %s %s", err, fault.KindOf(err), fault.CodeOf(err), c.kind, c.code)
			}
		})
	}
	if head, _ := d.volume.Head(t.Context()); head != 1 {
		t.Errorf("refusals moved the head to %d", head)
	}
}

func TestReversalUndoesOneEntryOrNamesWhatIsInTheWay(t *testing.T) {
	d := newDesk(t)
	before := []ledger.ID{d.segment(d.ids[0]), d.segment(d.ids[1])}
	first := d.post(d.merge(d.ids[0], d.ids[1]))
	undone := d.post(d.reversal(1, first.After...))
	if len(undone.After) != 2 || slices.Contains(undone.After, before[0]) {
		t.Errorf("a reversal mints new ids: %v", undone.After)
	}
	_, err := d.volume.Post(t.Context(), d.reversal(1, undone.After...))
	d.refused(err, fault.Conflict, "already-reversed")
	again := d.post(d.reversal(undone.Position, undone.After...))
	if len(again.After) != 1 || len(again.Joined.Links) != 1 {
		t.Errorf("a reversed reversal joins again: %+v", again)
	}

	// A merge on top does not stand in the way of undoing the one below.
	d.post(d.merge(d.ids[1], d.ids[2]))
	d.post(d.reversal(again.Position, d.segment(d.ids[0])))
	if d.segment(d.ids[0]) == d.segment(d.ids[1]) || d.segment(d.ids[1]) != d.segment(d.ids[2]) {
		t.Error("only the entry named is undone")
	}
}

func TestReversalOfASplitWhosePartsWereJoinedAgain(t *testing.T) {
	d := newDesk(t)
	members, err := d.volume.Members(t.Context(), d.biggest(), 0, 1000)
	if err != nil {
		t.Fatal(err)
	}
	a, b := members[0], members[len(members)-1]
	split := d.post(ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "birch", Expected: []ledger.ID{d.segment(a)},
		Split: &ledger.Split{Groups: [][]ledger.ID{{a}, {b}}}})
	joined := d.post(d.merge(a, b))
	_, err = d.volume.Post(t.Context(), d.reversal(split.Position, joined.After...))
	f := d.refused(err, fault.Conflict, "later-entries")
	if later := f.Data["entries"].([]ledger.Change); len(later) != 1 || later[0].Position != joined.Position {
		t.Errorf("in the way: %+v", later)
	}
}

func (d *desk) biggest() ledger.ID {
	d.Helper()
	var best ledger.Segment
	if _, err := d.volume.CurrentSegments(d.Context(), func(s ledger.Segment) error {
		if s.Supervoxels > best.Supervoxels {
			best = s
		}
		return nil
	}); err != nil {
		d.Fatal(err)
	}
	return best.ID
}

func TestPreviewOfASplitIsWhatTheSplitDoes(t *testing.T) {
	d := newDesk(t)
	members, err := d.volume.Members(t.Context(), d.biggest(), 0, 1000)
	if err != nil {
		t.Fatal(err)
	}
	a, b := members[0], members[len(members)-1]
	draft := ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "birch", Expected: []ledger.ID{d.segment(a)},
		Split: &ledger.Split{Groups: [][]ledger.ID{{a}, {b}}}}
	preview, err := d.volume.PreviewSplit(t.Context(), draft)
	if err != nil {
		t.Fatal(err)
	}
	if head, _ := d.volume.Head(t.Context()); head != 0 {
		t.Fatal("a preview posts nothing")
	}
	e := d.post(draft)
	if len(preview.Sides) != len(e.After) {
		t.Fatalf("%d sides foreseen, %d made", len(preview.Sides), len(e.After))
	}
	for i, id := range e.After {
		seg, err := d.volume.Segment(t.Context(), id)
		if err != nil || seg.Totals != preview.Sides[i].Totals {
			t.Errorf("side %d: foreseen %+v, is %+v (%v)", i+1, preview.Sides[i].Totals, seg.Totals, err)
		}
	}
	if fmt.Sprint(preview.Cut) != fmt.Sprint(e.Cut) {
		t.Errorf("cut foreseen %v, is %v", preview.Cut, e.Cut)
	}
}

// TestTheDatabaseItselfKeepsEntries tries to change the past as somebody with psql and the owner's rights would.
func TestTheDatabaseItselfKeepsEntries(t *testing.T) {
	d := newDesk(t)
	d.post(d.merge(d.ids[0], d.ids[1]))
	d.post(d.merge(d.ids[2], d.ids[3]))
	for sql, constraint := range map[string]string{
		`update entry set reason = 'something else'`:              "entry_is_final",
		`delete from entry where position = 2`:                    "entry_is_final",
		`truncate entry cascade`:                                  "entry_is_final",
		`update entry set position = 7 where position = 2`:        "entry_is_final",
		copyEntry(`position + 2`, `gen_random_uuid()`, "merge"):   "entry_gapless",
		copyEntry(`position`, `gen_random_uuid()`, "merge"):       "entry_pkey",
		copyEntry(`position + 1`, `entry_id`, "merge"):            "entry_once",
		copyEntry(`position + 1`, `gen_random_uuid()`, "erasure"): "entry_kind",
		`insert into piece (volume_id, lo, hi, grp, from_position)
		 select volume_id, lo, hi, grp + 1, from_position + 1 from piece limit 1`: "piece_one_group",
		`update segment set supervoxels = 0`: "segment_holds",
	} {
		_, err := d.pool.Exec(t.Context(), sql)
		var refusal *pgconn.PgError
		if !errors.As(err, &refusal) {
			t.Errorf("%s: %v", sql, err)
		} else if got := pg.Constraint(err); got != constraint && refusal.Code != "42501" {
			t.Errorf("%s: refused by %q (%s), want %q", sql, got, refusal.Message, constraint)
		}
	}
}

func copyEntry(position, id, kind string) string {
	return `insert into entry (volume_id, position, entry_id, kind, person, posted_at, reason, before, after,
		joined_contacts, joined_links, cut_contacts, cut_links, content, leaf_hash)
		select volume_id, ` + position + `, ` + id + `, '` + kind + `', person, posted_at, reason, before, after,
		joined_contacts, joined_links, cut_contacts, cut_links, content, leaf_hash from entry where position = 2`
}

// TestCompanionsShareTheEntrysFate posts a group in which one member's companion refuses: that one alone fails.
func TestCompanionsShareTheEntrysFate(t *testing.T) {
	d := newDesk(t)
	if _, err := d.pool.Exec(t.Context(), `create table answer (position bigint, constraint answer_even check (position % 2 = 0))`); err != nil {
		t.Fatal(err)
	}
	answer := ledger.Companion{SQL: `insert into answer values ($1)`, Args: func(p int64) []any { return []any{p} }}
	_, err := d.volume.Post(t.Context(), d.merge(d.ids[0], d.ids[1]), answer)
	if pg.Constraint(err) != "answer_even" {
		t.Fatalf("position 1 is odd: %v", err)
	}
	if d.segment(d.ids[0]) == d.segment(d.ids[1]) {
		t.Error("the entry was posted without its companion")
	}
	d.post(d.merge(d.ids[2], d.ids[3]))
	if _, err := d.volume.Post(t.Context(), d.merge(d.ids[0], d.ids[1]), answer); err != nil {
		t.Errorf("position 2 is even: %v", err)
	}
	var n int
	if err := d.pool.QueryRow(t.Context(), `select count(*) from answer where position = 2`).Scan(&n); err != nil || n != 1 {
		t.Errorf("%d companions stored, %v", n, err)
	}
}

// TestTwoProcessesPostOnOneVolume lets two ledgers, which share nothing but the database, join everything to everything.
// Each entry is posted once, positions have no gap, and whoever was too late is told.
func TestTwoProcessesPostOnOneVolume(t *testing.T) {
	d := newDesk(t)
	processes := []*ledger.Volume{d.volume, ledgertest.Open(t, ledger.New(d.pool), d.volume.Name())}
	var wg sync.WaitGroup
	for w := range 8 {
		wg.Go(func() {
			v := processes[w%2]
			for i := 1; i < len(d.ids); i++ {
				a, b := d.ids[0], d.ids[(i+w)%len(d.ids)]
				for {
					now, err := v.SegmentsOf(t.Context(), []ledger.ID{a, b}, ledger.At{})
					if err != nil {
						t.Error(err)
						return
					}
					_, err = v.Post(t.Context(), ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "agent", Expected: now, Merge: &ledger.Merge{A: a, B: b}})
					if k := fault.KindOf(err); k == fault.Retired || k == fault.Busy {
						continue // somebody was faster: look again
					}
					if err != nil && fault.CodeOf(err) != "already-joined" {
						t.Error(err)
					}
					break
				}
			}
		})
	}
	wg.Wait()
	entries, err := d.volume.Entries(t.Context(), ledger.Filter{})
	if err != nil || len(entries) != len(d.ids)-1 {
		t.Fatalf("%d entries for %d segments, %v", len(entries), len(d.ids), err)
	}
	for i, e := range entries {
		if e.Position != int64(i+1) {
			t.Errorf("position %d stands at place %d", e.Position, i+1)
		}
	}
	for _, v := range processes {
		if s, err := v.SegmentsOf(t.Context(), d.ids, ledger.At{}); err != nil || len(slices.Compact(slices.Sorted(slices.Values(s)))) != 1 {
			t.Errorf("not one segment: %v %v", s, err)
		}
	}
}

func TestATimeMeansTheLastPositionAtOrBeforeIt(t *testing.T) {
	d := newDesk(t)
	was := d.segment(d.ids[0])
	e := d.post(d.merge(d.ids[0], d.ids[1]))
	at := func(x time.Time) ledger.ID {
		s, err := d.volume.SegmentsOf(t.Context(), d.ids[:1], ledger.At{Time: &x})
		if err != nil {
			t.Fatal(err)
		}
		return s[0]
	}
	if got := at(e.At.Add(-time.Microsecond)); got != was {
		t.Errorf("before the entry: %s, want %s", got, was)
	}
	if got := at(e.At); got != e.After[0] {
		t.Errorf("at the entry: %s, want %s", got, e.After[0])
	}
}

func TestNeuronsStayWhileTheirSegmentsChange(t *testing.T) {
	d := newDesk(t)
	if _, err := d.volume.AddNeuron(t.Context(), "N1", d.ids[0], "rowan"); err != nil {
		t.Fatal(err)
	}
	_, err := d.volume.AddNeuron(t.Context(), "N1", d.ids[1], "rowan")
	d.refused(err, fault.Conflict, "neuron-exists")
	before := d.segment(d.ids[0])
	e := d.post(d.merge(d.ids[0], d.ids[1]))
	now, err := d.volume.Neuron(t.Context(), "N1", ledger.At{})
	if err != nil || now.Segment != e.After[0] {
		t.Errorf("now %+v, %v", now, err)
	}
	then, err := d.volume.Neuron(t.Context(), "N1", ledger.AtPosition(0))
	if err != nil || then.Segment != before {
		t.Errorf("at position 0 %+v, %v", then, err)
	}
	history, err := d.volume.AnchorEntries(t.Context(), d.ids[0])
	if err != nil || len(history) != 1 || history[0].Position != e.Position {
		t.Errorf("history %+v, %v", history, err)
	}
}
