package triage_test

import (
	"math/rand/v2"
	"slices"
	"sync"
	"testing"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/synth"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
	"fettle.example/fettle/triage"
)

func volume(t *testing.T) (*pgxpool.Pool, *ledger.Volume) {
	t.Helper()
	dir := t.TempDir()
	if _, err := synth.WriteTiny(dir, 11, 150); err != nil {
		t.Fatal(err)
	}
	led, pool := ledgertest.New(t)
	return pool, ledgertest.Open(t, led, ledgertest.Import(t, pool, dir))
}

// TestFindingsFollowTheLedger posts what triage proposes, entry by entry, and follows in batches of different sizes. Whenever it
// has followed, no finding names a segment that is retired, and each names the segments that hold its supervoxels now.
func TestFindingsFollowTheLedger(t *testing.T) {
	pool, v := volume(t)
	if p, err := triage.Position(t.Context(), pool, v); err != nil || p != triage.Nowhere {
		t.Fatal(p, err)
	}
	if p, err := triage.Follow(t.Context(), v); err != nil || p != 0 {
		t.Fatalf("the first time everything is judged: %d, %v", p, err)
	}
	rng := rand.New(rand.NewPCG(1, 2))
	for range 8 {
		for range 1 + rng.IntN(4) {
			postOne(t, pool, v, rng)
		}
		p, err := triage.Follow(t.Context(), v)
		head, herr := v.Head(t.Context())
		if err != nil || herr != nil || p != head {
			t.Fatalf("followed to %d of %d: %v %v", p, head, err, herr)
		}
		checkFindings(t, pool, v)
	}
}

// postOne posts the correction that some place proposes, as far as it still fits.
func postOne(t *testing.T, pool *pgxpool.Pool, v *ledger.Volume, rng *rand.Rand) {
	t.Helper()
	places, err := triage.Places(t.Context(), pool, v, nil)
	if err != nil || len(places) == 0 {
		t.Fatal(len(places), err)
	}
	p := places[rng.IntN(len(places))]
	d := ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "alder", Expected: p.Segments}
	switch {
	case p.Proposal == nil:
		return
	case p.Proposal.Kind == triage.ProposeMerge:
		d.Merge = &ledger.Merge{A: p.Proposal.A, B: p.Proposal.B}
	default:
		d.Split = &ledger.Split{Groups: p.Proposal.Groups}
	}
	if _, err := v.Post(t.Context(), d); err != nil && fault.KindOf(err) != fault.Retired {
		t.Fatalf("%+v: %v", p, err)
	}
}

func checkFindings(t *testing.T, pool *pgxpool.Pool, v *ledger.Volume) {
	t.Helper()
	findings, err := triage.Findings(t.Context(), v, triage.Filter{Limit: 10000})
	if err != nil || len(findings) == 0 {
		t.Fatal(len(findings), err)
	}
	for _, f := range findings {
		for _, id := range f.Segments {
			if seg, err := v.Segment(t.Context(), id); err != nil || seg.Retired > 0 {
				t.Fatalf("%s at %s names segment %s: %+v %v", f.Detector, f.Key, id, seg, err)
			}
		}
		if f.Proposal == nil {
			continue
		}
		named := []ledger.ID{f.Proposal.A, f.Proposal.B}
		if f.Proposal.Kind == triage.ProposeSplit {
			named = slices.Concat(f.Proposal.Groups...)
		}
		hold, err := v.SegmentsOf(t.Context(), named, ledger.At{})
		if err != nil {
			t.Fatal(err)
		}
		slices.Sort(hold)
		if hold = slices.Compact(hold); !slices.Equal(hold, f.Segments) {
			t.Fatalf("%s at %s names %v, and %v hold its supervoxels", f.Detector, f.Key, f.Segments, hold)
		}
	}
}

// TestTwoFollowersAtOnce lets several processes follow the same entries.
func TestTwoFollowersAtOnce(t *testing.T) {
	pool, v := volume(t)
	if err := triage.Full(t.Context(), v, nil); err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(5, 6))
	for range 6 {
		postOne(t, pool, v, rng)
	}
	var wg sync.WaitGroup
	for range 4 {
		other := ledgertest.Open(t, ledger.New(pool), v.Name())
		wg.Go(func() {
			if _, err := triage.Follow(t.Context(), other); err != nil {
				t.Error(err)
			}
		})
	}
	wg.Wait()
	checkFindings(t, pool, v)
	var twice int
	if err := pool.QueryRow(t.Context(), `
		select count(*) from (select from finding where retired is null group by detector, place having count(*) > 1) x`).Scan(&twice); err != nil || twice > 0 {
		t.Errorf("%d places are named twice by one detector, %v", twice, err)
	}
}

// TestJudgingIsRepeatable: the same segments give the same findings, whoever looks and in whatever order.
func TestJudgingIsRepeatable(t *testing.T) {
	pool, v := volume(t)
	var runs [2][]triage.Place
	for i := range runs {
		if err := triage.Full(t.Context(), v, nil); err != nil {
			t.Fatal(err)
		}
		places, err := triage.Places(t.Context(), pool, v, nil)
		if err != nil {
			t.Fatal(err)
		}
		runs[i] = places
	}
	if len(runs[0]) == 0 || len(runs[0]) != len(runs[1]) {
		t.Fatalf("%d places, then %d", len(runs[0]), len(runs[1]))
	}
	for i := range runs[0] {
		a, b := runs[0][i], runs[1][i]
		if a.Key != b.Key || a.Priority != b.Priority || a.Said != b.Said {
			t.Errorf("place %d: %+v, then %+v", i, a, b)
		}
	}
}

func TestQualityAgainstTruth(t *testing.T) {
	_, v := volume(t)
	before, err := triage.Score(t.Context(), v, ledger.At{})
	if err != nil || before.Scored == 0 || before.Split <= 0 || before.Merge <= 0 {
		t.Fatalf("%+v %v", before, err)
	}
	then, err := triage.Score(t.Context(), v, ledger.AtPosition(0))
	if err != nil || *then != *before {
		t.Errorf("at position 0 %+v, now %+v: %v", then, before, err)
	}
}
