package triage

import (
	"slices"
	"testing"

	"github.com/google/uuid"

	"fettle.example/fettle/internal/synth"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
)

// TestAnEntryWhileOneLooks: both sides of a suspected false split change, the first before and the second after the look began.
// The finding is carried to the segments that are current, and a look at one side still knows the other.
func TestAnEntryWhileOneLooks(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	if _, err := synth.WriteTiny(dir, 11, 150); err != nil {
		t.Fatal(err)
	}
	led, pool := ledgertest.New(t)
	v := ledgertest.Open(t, led, ledgertest.Import(t, pool, dir))
	if err := Full(t.Context(), v, nil); err != nil {
		t.Fatal(err)
	}
	f, others := splitWithoutNuclei(t, v)
	first := join(t, v, f.Proposal.A, others[0])
	j, err := newJudge(t.Context(), v)
	if err != nil {
		t.Fatal(err)
	}
	second := join(t, v, f.Proposal.B, others[1])

	kept, err := j.carry(t.Context(), first.Before, map[ledger.ID]bool{})
	if err != nil {
		t.Fatal(err)
	}
	i := slices.IndexFunc(kept, func(k Finding) bool { return k.Detector == f.Detector && k.Key == f.Key })
	if i < 0 {
		t.Fatalf("the finding at %s was lost", f.Key)
	}
	now := slices.Sorted(slices.Values([]ledger.ID{first.After[0], second.After[0]}))
	if !slices.Equal(kept[i].Segments, now) {
		t.Errorf("the finding names %v, and %v hold its supervoxels", kept[i].Segments, now)
	}
	if s, err := j.segment(t.Context(), second.After[0]); err != nil || s.ID != second.After[0] {
		t.Errorf("the other side is %+v, %v", s, err)
	}
}

// splitWithoutNuclei picks a suspected false split, and a supervoxel of each of two segments that it does not name; none has a
// nucleus, so that joining them to it says nothing about which cell is which.
func splitWithoutNuclei(t *testing.T, v *ledger.Volume) (Finding, []ledger.ID) {
	t.Helper()
	findings, err := Findings(t.Context(), v, Filter{Kind: FalseSplit, Limit: 1000})
	if err != nil {
		t.Fatal(err)
	}
	var plain []ledger.Segment
	if _, err := v.CurrentSegments(t.Context(), func(s ledger.Segment) error {
		if s.Nuclei == 0 {
			plain = append(plain, s)
		}
		return nil
	}); err != nil {
		t.Fatal(err)
	}
	for _, f := range findings {
		isPlain := func(id ledger.ID) bool {
			return slices.ContainsFunc(plain, func(s ledger.Segment) bool { return s.ID == id })
		}
		if !isPlain(f.Segments[0]) && !isPlain(f.Segments[1]) {
			continue
		}
		var others []ledger.ID
		for _, s := range plain {
			if slices.Contains(f.Segments, s.ID) || len(others) == 2 {
				continue
			}
			ids, err := v.Members(t.Context(), s.ID, 0, 1)
			if err != nil {
				t.Fatal(err)
			}
			others = append(others, ids[0])
		}
		if len(others) == 2 {
			return f, others
		}
	}
	t.Fatalf("none of %d findings suits", len(findings))
	return Finding{}, nil
}

func join(t *testing.T, v *ledger.Volume, a, b ledger.ID) ledger.Entry {
	t.Helper()
	saw, err := v.SegmentsOf(t.Context(), []ledger.ID{a, b}, ledger.At{})
	if err != nil {
		t.Fatal(err)
	}
	e, err := v.Post(t.Context(), ledger.Draft{ID: uuid.Must(uuid.NewV7()), Person: "alder", Expected: saw, Merge: &ledger.Merge{A: a, B: b}})
	if err != nil {
		t.Fatal(err)
	}
	return e
}
