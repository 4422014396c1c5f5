package tasks

import (
	"math"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// clock is a time of the test's day.
func clock(t testing.TB, s string) time.Time {
	t.Helper()
	at, err := time.Parse(time.DateTime, "2026-03-02 "+s)
	if err != nil {
		t.Fatal(err)
	}
	return at
}

// did is a claim from one time to another.
func did(t testing.TB, person, from, to, ended, outcome, verdict string) hold {
	end := clock(t, to)
	start := clock(t, from)
	return hold{person: person, kind: "false-merge", start: start, until: start.Add(DefaultLease), end: &end, ended: ended, outcome: outcome, verdict: verdict}
}

func TestThroughputOfADay(t *testing.T) {
	t.Parallel()
	got := byDay([]hold{
		did(t, "alder", "09:00:00", "09:10:00", EndedResolved, Corrected, Accept),
		did(t, "alder", "09:14:00", "09:20:00", EndedResolved, Sound, Return), // after 4 minutes, which count
		did(t, "alder", "09:25:00", "09:30:00", EndedReleased, "", ""),        // after 5, which don't
		did(t, "alder", "09:31:00", "09:59:00", EndedExpired, "", ""),         // after 1, which does; itself it doesn't
		did(t, "alder", "10:00:00", "10:08:00", EndedResolved, Unclear, ""),   // after a lease that ran out: no gap
		did(t, "birch", "09:00:00", "09:30:00", EndedOvertaken, "", ""),
	}, time.UTC, clock(t, "18:00:00"))
	want := []Throughput{
		{
			Person: "alder", Day: clock(t, "00:00:00"), Resolved: 3, Corrected: 1, Sound: 1, Unclear: 1, Released: 1, Expired: 1,
			ActiveHours: (10 + 4 + 6 + 5 + 1 + 8) / 60., PerHour: 3 / (34 / 60.),
			// Times 5+ 6 8 10 20+ (+: censored; the lease that ran out counts to its end). S(6) = 3/4, S(8) = 1/2, S(10) = 1/4.
			Kinds:    []KindTime{{Kind: "false-merge", Resolved: 3, Censored: 2, Median: 9, Reached: true}},
			Reviewed: 2, Accepted: 1, Returned: 1, Share: 0.5, ShareLo: 0.0945312, ShareHi: 0.9054688,
		},
		{
			Person: "birch", Day: clock(t, "00:00:00"), ActiveHours: 0.5,
			Kinds: []KindTime{{Kind: "false-merge", Censored: 1}},
		},
	}
	if diff := cmp.Diff(want, got, cmpopts.EquateApprox(0, 1e-6)); diff != "" {
		t.Errorf("-want +got\n%s", diff)
	}
}

// Fifteen tasks, four of them given up: R survival 3.5-3 and statsmodels say that the median is 8 minutes. Of the
// finished ones alone it would be 6.
func TestMedianMinutesMindThoseGivenUp(t *testing.T) {
	t.Parallel()
	minutes := []int{2, 3, 3, 4, 5, 5, 6, 7, 8, 8, 10, 12, 15, 20, 30}
	done := []int{1, 1, 1, 1, 1, 0, 1, 1, 0, 1, 1, 0, 1, 1, 0}
	var holds []hold
	at := clock(t, "08:00:00")
	for i, m := range minutes {
		end := at.Add(time.Duration(m) * time.Minute)
		h := hold{person: "alder", kind: "false-split", start: at, until: at.Add(time.Hour), end: &end, ended: EndedResolved, outcome: Sound}
		if done[i] == 0 {
			h.ended, h.outcome = EndedReleased, ""
		}
		holds = append(holds, h)
		at = end
	}
	got := byDay(holds, time.UTC, at)
	want := []KindTime{{Kind: "false-split", Resolved: 11, Censored: 4, Median: 8, Reached: true}}
	if len(got) != 1 || !cmp.Equal(want, got[0].Kinds) {
		t.Errorf("%+v", got)
	}
}

// The accepted share's interval is Wilson's: 15 of 148 is .0623863995307 to .1604872417233 (R's prop.test without
// continuity correction).
func TestAcceptedShareHasItsInterval(t *testing.T) {
	t.Parallel()
	var holds []hold
	for i := range 148 {
		verdict := Return
		if i < 15 {
			verdict = Accept
		}
		holds = append(holds, did(t, "alder", "09:00:00", "09:01:00", EndedResolved, Sound, verdict))
	}
	got := byDay(holds, time.UTC, clock(t, "10:00:00"))[0]
	if math.Abs(got.ShareLo-.0623863995307) > 1e-12 || math.Abs(got.ShareHi-.1604872417233) > 1e-12 {
		t.Errorf("%v to %v", got.ShareLo, got.ShareHi)
	}
}

// A claim belongs to the day on which it ended where the lead is.
func TestDaysBeginAtTheLeadsMidnight(t *testing.T) {
	t.Parallel()
	east := time.FixedZone("east", 9*3600)
	holds := []hold{
		did(t, "alder", "14:50:00", "14:59:00", EndedResolved, Sound, ""), // 23:59 there
		did(t, "alder", "14:59:30", "15:01:00", EndedResolved, Sound, ""), // 00:01 there
	}
	for zone, want := range map[*time.Location]int{time.UTC: 1, east: 2} {
		if got := byDay(holds, zone, clock(t, "18:00:00")); len(got) != want {
			t.Errorf("%v: %d days, want %d", zone, len(got), want)
		}
	}
	if got := byDay(holds, east, clock(t, "18:00:00"))[0]; !got.Day.Equal(time.Date(2026, 3, 3, 0, 0, 0, 0, east)) || got.Resolved != 1 {
		t.Errorf("the newest day first: %+v", got)
	}
}

func TestThroughputFromTheQueue(t *testing.T) {
	t.Parallel()
	b := newBench(t, place(3, 10), place(2, 20), place(1, 30))
	b.end(alder, b.take(alder), Sound)
	b.judge(cedar, 1, Accept)
	b.release(alder, b.take(alder))
	b.take(birch) // goes on
	got, err := b.Throughput(t.Context(), b.name, ThroughputFilter{})
	if err != nil || len(got) != 2 || got[0].Person != "alder" || got[1].Person != "birch" {
		t.Fatalf("%+v %v", got, err)
	}
	if a := got[0]; a.Resolved != 1 || a.Released != 1 || a.Accepted != 1 || a.ActiveHours <= 0 {
		t.Errorf("%+v", a)
	}
	if k := got[1].Kinds; len(k) != 1 || k[0].Censored != 1 {
		t.Errorf("a claim that goes on is censored: %+v", k)
	}
	for _, f := range []ThroughputFilter{{Person: "cedar"}, {To: time.Now().Add(-time.Hour)}, {From: time.Now().Add(time.Hour)}} {
		if got, err := b.Throughput(t.Context(), b.name, f); err != nil || len(got) != 0 {
			t.Errorf("%+v: %+v %v", f, got, err)
		}
	}
}
