package tasks

import (
	"cmp"
	"context"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgtype"

	"fettle.example/fettle/internal/stats"
)

// shortBreak is how long a gap between two claims may be and still count as work: reading on, or a sip of coffee.
const shortBreak = 5 * time.Minute

// ThroughputFilter chooses claims by person and by the time they ended.
type ThroughputFilter struct {
	Person   string         // "" is everybody
	From, To time.Time      // To is excluded; zero: no bound
	Zone     *time.Location // whose midnights part the days; nil is UTC
}

// Throughput is one person's work of one day. It is personal data, and says nothing about how hard the tasks were.
//
// A claim belongs to the day on which it ended, one that goes on to the day on which it began. Active hours are the
// spans of that day's claims from their start to their end, plus the gaps between them that are shorter than
// shortBreak. A claim whose lease ran out adds nothing, since nobody knows how much of it was work.
type Throughput struct {
	Person      string
	Day         time.Time // its first instant in the zone asked for
	Resolved    int       // tasks
	Corrected   int
	Sound       int
	Unclear     int
	Released    int
	Expired     int
	ActiveHours float64
	PerHour     float64 // tasks resolved an active hour; 0 when there was none
	Kinds       []KindTime
	Reviewed    int // of the tasks resolved that day
	Accepted    int
	Returned    int
	Share       float64 // accepted of reviewed, with its 95 % Wilson interval; all 0 when Reviewed is
	ShareLo     float64
	ShareHi     float64
}

// KindTime is how long tasks of one kind take, by Kaplan and Meier: a claim that ended without an outcome tells only
// that the task would have taken longer. Releases of tasks that are too hard make the median optimistic; so look at
// the share of censored ones as well.
type KindTime struct {
	Kind     string
	Resolved int
	Censored int     // released, ran out, overtaken, or still going on
	Median   float64 // minutes; 0 when not reached
	Reached  bool    // whether so many ended with an outcome that there is a median
}

// hold is a claim as Throughput looks at it.
type hold struct {
	person, kind            string
	start, until            time.Time
	end                     *time.Time
	ended, outcome, verdict string
}

// Throughput tells each person's work by day, newest day first.
func (q *Queue) Throughput(ctx context.Context, volume string, f ThroughputFilter) ([]Throughput, error) {
	id, err := q.volume(ctx, volume)
	if err != nil {
		return nil, err
	}
	rows, err := q.pool.Query(ctx, `
		select c.person, t.kind, c.claimed_at, c.until, c.ended_at, coalesce(c.ended, ''), coalesce(c.outcome, ''), coalesce(r.verdict, '')
		  from claim c join task t using (volume_id, number) left join review r on r.claim_id = c.claim_id
		 where c.volume_id = $1 and ($2 = '' or c.person = $2)
		   and (c.ended is not null and c.ended_at >= $3 and c.ended_at < $4 or c.ended is null and c.claimed_at >= $3 and c.claimed_at < $4)
		 order by c.person, c.claimed_at`, id, f.Person, bound(f.From, pgtype.NegativeInfinity), bound(f.To, pgtype.Infinity))
	if err != nil {
		return nil, err
	}
	holds, err := pgx.CollectRows(rows, func(row pgx.CollectableRow) (h hold, err error) {
		err = row.Scan(&h.person, &h.kind, &h.start, &h.until, &h.end, &h.ended, &h.outcome, &h.verdict)
		return h, err
	})
	if err != nil {
		return nil, err
	}
	zone := f.Zone
	if zone == nil {
		zone = time.UTC
	}
	return byDay(holds, zone, time.Now()), nil
}

// bound is a bound of time, or an infinite one when none is set.
func bound(t time.Time, none pgtype.InfinityModifier) pgtype.Timestamptz {
	if t.IsZero() {
		return pgtype.Timestamptz{InfinityModifier: none, Valid: true}
	}
	return pgtype.Timestamptz{Time: t, Valid: true}
}

// byDay sums up claims, which are in order of person and start.
func byDay(holds []hold, zone *time.Location, now time.Time) []Throughput {
	type key struct {
		person string
		day    time.Time
	}
	days := make(map[key][]hold)
	for _, h := range holds {
		at := h.start
		if h.end != nil {
			at = *h.end
		}
		y, m, d := at.In(zone).Date()
		k := key{h.person, time.Date(y, m, d, 0, 0, 0, 0, zone)}
		days[k] = append(days[k], h)
	}
	out := make([]Throughput, 0, len(days))
	for k, hs := range days {
		t := Throughput{Person: k.person, Day: k.day}
		t.count(hs)
		t.ActiveHours = active(hs).Hours()
		if t.ActiveHours > 0 {
			t.PerHour = float64(t.Resolved) / t.ActiveHours
		}
		t.Kinds = kindTimes(hs, now)
		if lo, hi, ok := stats.Wilson(t.Accepted, t.Reviewed, stats.Z95); ok {
			t.Share, t.ShareLo, t.ShareHi = float64(t.Accepted)/float64(t.Reviewed), lo, hi
		}
		out = append(out, t)
	}
	slices.SortFunc(out, func(a, b Throughput) int {
		return cmp.Or(b.Day.Compare(a.Day), cmp.Compare(a.Person, b.Person))
	})
	return out
}

func (t *Throughput) count(hs []hold) {
	one := map[string]*int{
		Corrected: &t.Corrected, Sound: &t.Sound, Unclear: &t.Unclear,
		EndedResolved: &t.Resolved, EndedReleased: &t.Released, EndedExpired: &t.Expired,
		Accept: &t.Accepted, Return: &t.Returned,
	}
	for _, h := range hs {
		for _, word := range []string{h.ended, h.outcome, h.verdict} {
			if n := one[word]; n != nil {
				*n++
			}
		}
	}
	t.Reviewed = t.Accepted + t.Returned
}

// active is the time that a day's claims took, in order of their start. A person holds one task at a time, so they
// don't overlap.
func active(hs []hold) time.Duration {
	var sum time.Duration
	var last time.Time // the end of the one before
	for _, h := range hs {
		if gap := h.start.Sub(last); !last.IsZero() && gap > 0 && gap < shortBreak {
			sum += gap
		}
		last = time.Time{}
		if h.end != nil && h.ended != EndedExpired {
			sum += h.end.Sub(h.start)
			last = *h.end
		}
	}
	return sum
}

// kindTimes estimates the median handling time of each kind. Times are in minutes.
func kindTimes(hs []hold, now time.Time) []KindTime {
	byKind := make(map[string][]stats.Duration)
	for _, h := range hs {
		end := now
		if h.end != nil {
			end = *h.end
		}
		if h.ended == EndedExpired && h.until.Before(end) {
			end = h.until // nobody held it any more until somebody noticed
		}
		byKind[h.kind] = append(byKind[h.kind], stats.Duration{Time: end.Sub(h.start).Minutes(), Ended: h.ended == EndedResolved})
	}
	out := make([]KindTime, 0, len(byKind))
	for kind, times := range byKind {
		s := stats.KaplanMeier(times)
		k := KindTime{Kind: kind, Resolved: s.N - s.Censored, Censored: s.Censored}
		k.Median, k.Reached = s.Median()
		out = append(out, k)
	}
	slices.SortFunc(out, func(a, b KindTime) int { return cmp.Compare(a.Kind, b.Kind) })
	return out
}
