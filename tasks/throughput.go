package tasks

import (
	"context"
	"errors"
	"time"
)

var errNotYet = errors.New("not yet")

// ThroughputFilter chooses claims by person and by the time they ended.
type ThroughputFilter struct {
	Person   string         // "" is everybody
	From, To time.Time      // To is excluded; zero: no bound
	Zone     *time.Location // whose midnights part the days; nil is UTC
}

// Throughput is one person's work of one day. It is personal data.
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
	PerHour     float64 // tasks an active hour; 0 when there was none
	Kinds       []KindTime
	Reviewed    int // of the tasks resolved that day
	Accepted    int
	Returned    int
	Share       float64 // accepted of reviewed; with its 95 % Wilson interval. All 0 when Reviewed is
	ShareLo     float64
	ShareHi     float64
}

// KindTime is how long tasks of one kind take, by Kaplan and Meier: a claim that ended without an outcome tells only
// that the task would have taken longer.
type KindTime struct {
	Kind     string
	Resolved int
	Censored int     // released, ran out, overtaken, or still going on
	Median   float64 // minutes; 0 when not reached
	Reached  bool    // whether half of them ended with an outcome
}

// Throughput tells each person's work by day, newest day first.
func (q *Queue) Throughput(ctx context.Context, volume string, f ThroughputFilter) ([]Throughput, error) {
	return nil, errNotYet
}
