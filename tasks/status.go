package tasks

import (
	"context"
	"time"

	"github.com/jackc/pgx/v5"
)

// QueueStatus is where a volume's work stands.
type QueueStatus struct {
	States  map[string]int // tasks by state
	Open    []OpenKind     // what waits, most minutes first
	Minutes float64        // expected, of all open tasks
	Holders []Holder       // who works on what, by handle: personal data
	Lag     int64          // entries that the queue has not followed yet
}

// OpenKind counts open tasks of one kind and family.
type OpenKind struct {
	Kind, Family string
	Tasks        int
	Ready        int // of them, at the head of every line
	Assigned     int // of them, given to somebody
	Minutes      float64
	Gain         float64
}

// Holder is a person with a live claim.
type Holder struct {
	Person    string
	Task      int64
	Kind      string
	At, Until time.Time
}

// Status says where a volume's work stands.
func (q *Queue) Status(ctx context.Context, volume string) (QueueStatus, error) {
	s := QueueStatus{States: make(map[string]int)}
	id, err := q.volume(ctx, volume)
	if err != nil {
		return s, err
	}
	rows, _ := q.pool.Query(ctx, `select state, count(*) from task where volume_id = $1 group by state`, id)
	var state string
	var n int
	if _, err := pgx.ForEachRow(rows, []any{&state, &n}, func() error { s.States[state] = n; return nil }); err != nil {
		return s, err
	}
	rows, _ = q.pool.Query(ctx, `
		select kind, family, count(*), count(*) filter (where head), count(assigned_to), sum(minutes), sum(gain)
		  from task join task_place using (volume_id, number) where volume_id = $1 and state = 'open' group by kind, family order by sum(minutes) desc, kind, family`, id)
	if s.Open, err = pgx.CollectRows(rows, pgx.RowToStructByPos[OpenKind]); err != nil {
		return s, err
	}
	for _, k := range s.Open {
		s.Minutes += k.Minutes
	}
	rows, _ = q.pool.Query(ctx, `
		select c.person, c.number, t.kind, c.claimed_at, c.until from claim c join task t using (volume_id, number)
		 where c.volume_id = $1 and c.ended is null order by c.person`, id)
	if s.Holders, err = pgx.CollectRows(rows, pgx.RowToStructByPos[Holder]); err != nil {
		return s, err
	}
	err = q.pool.QueryRow(ctx, `
		select coalesce((select position from head where volume_id = $1), 0)
		     - greatest(coalesce((select position from follower where volume_id = $1 and name = $2), 0), 0)`, id, follower).Scan(&s.Lag)
	return s, err
}
