package tasks

import (
	"context"
	"encoding/base64"
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"strings"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/ledger"
)

// Filter chooses tasks. Zero fields choose all.
type Filter struct {
	State      string
	Kind       string
	Family     string
	AssignedTo string
	Person     string // who holds it, or ended it
	Segment    *ledger.ID
	Cursor     string // as a former page returned it
	Limit      int    // 0: 100; at most 1000
}

// Page sizes.
const (
	defaultPage = 100
	largestPage = 1000
)

// taskColumns are what scanTask reads of a task t, its place p and its claim c; its review and its volume's name follow.
const taskColumns = `
	select t.number, p.task_id, p.place, t.family, t.kind, t.state, t.segments, t.waits, t.priority, coalesce(t.assigned_to, ''),
	       p.probability, p.gain, p.minutes, p.point_nm, p.made_at, p.said, p.findings, p.proposal,
	       c.claim_id, c.person, c.claimed_at, c.until, c.ended_at, c.ended, c.outcome, c.note, c.position`

// selectTasks reads tasks of the volume $1; conditions are added.
const selectTasks = taskColumns + `, r.person, r.verdict, r.note, r.reviewed_at, r.position, v.name
	  from task t
	  join task_place p using (volume_id, number)
	  join volume v using (volume_id)
	  left join claim c on c.claim_id = t.claim_id
	  left join review r on r.claim_id = t.claim_id
	 where t.volume_id = $1`

// selectReturned reads the task and the claim that a function returns, since a query can't see in the tables what a
// function that it calls has just written there. Neither has a review yet.
func selectReturned(function string) string {
	return taskColumns + `, null, null, null, null, null, (select name from volume v where v.volume_id = t.volume_id)
	  from ` + function + ` f
	 cross join lateral (select (f.t).*) t
	 cross join lateral (select (f.c).*) c
	  join task_place p on p.volume_id = t.volume_id and p.number = t.number`
}

func scanTask(row pgx.CollectableRow) (Task, error) {
	var t Task
	var claim *uuid.UUID
	var person, ended, outcome, note, reviewer, verdict, remark *string
	var at, until, endedAt, reviewedAt *time.Time
	var entry, reversal *int64
	err := row.Scan(&t.Number, &t.ID, &t.Key, &t.Family, &t.Kind, &t.State, &t.Segments, &t.Waits, &t.Priority, &t.AssignedTo,
		&t.Probability, &t.Gain, &t.Minutes, &t.Point, &t.MadeAt, &t.Said, &t.Findings, &t.Proposal,
		&claim, &person, &at, &until, &endedAt, &ended, &outcome, &note, &entry,
		&reviewer, &verdict, &remark, &reviewedAt, &reversal, &t.Volume)
	if err != nil || claim == nil {
		return t, err
	}
	t.Claim = &Claim{ID: *claim, Task: t.Number, Person: *person, At: *at, Until: *until, EndedAt: endedAt, Ended: deref(ended)}
	if outcome != nil {
		t.Resolution = &Resolution{Outcome: *outcome, Person: *person, At: *endedAt, Note: deref(note), Position: deref(entry)}
	}
	if verdict != nil {
		t.Review = &Review{Verdict: *verdict, Person: *reviewer, At: *reviewedAt, Note: deref(remark), Reversal: deref(reversal)}
	}
	return t, nil
}

func deref[T any](p *T) T {
	if p == nil {
		var zero T
		return zero
	}
	return *p
}

// Get finds a task by its number.
func (q *Queue) Get(ctx context.Context, volume string, number int64) (Task, error) {
	id, err := q.volume(ctx, volume)
	if err != nil {
		return Task{}, err
	}
	return q.get(ctx, q.pool, id, number)
}

func (q *Queue) get(ctx context.Context, db pg.DB, volume int32, number int64) (Task, error) {
	t, err := queryOne(ctx, db, selectTasks+` and t.number = $2`, volume, number)
	if errors.Is(err, pgx.ErrNoRows) {
		err = unknownTask(number)
	}
	return t, err
}

func unknownTask(number int64) error {
	return fault.Newf(fault.NotFound, "task-unknown", "there is no task %d", number).WithNext("list the tasks")
}

func query(ctx context.Context, db pg.DB, sql string, args ...any) ([]Task, error) {
	rows, err := db.Query(ctx, sql, args...)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, scanTask)
}

// queryOne reads one task; pgx.ErrNoRows when there is none.
func queryOne(ctx context.Context, db pg.DB, sql string, args ...any) (Task, error) {
	rows, err := db.Query(ctx, sql, args...)
	if err != nil {
		return Task{}, err
	}
	return pgx.CollectExactlyOneRow(rows, scanTask)
}

// List lists tasks, best first, a page at a time; next is "" at the end.
func (q *Queue) List(ctx context.Context, volume string, f Filter) (page []Task, next string, err error) {
	id, err := q.volume(ctx, volume)
	if err != nil {
		return nil, "", err
	}
	sql, args := selectTasks, []any{id}
	where := func(cond string, values ...any) {
		for _, v := range values {
			args = append(args, v)
			cond = strings.Replace(cond, "?", fmt.Sprintf("$%d", len(args)), 1)
		}
		sql += " and " + cond
	}
	for _, c := range []struct{ column, value string }{
		{"t.state", f.State}, {"t.kind", f.Kind}, {"t.family", f.Family}, {"t.assigned_to", f.AssignedTo}, {"c.person", f.Person},
	} {
		if c.value != "" {
			where(c.column+" = ?", c.value)
		}
	}
	if f.Segment != nil {
		where("t.segments @> array[?::bigint]", *f.Segment)
	}
	if f.Cursor != "" {
		priority, number, err := readCursor(f.Cursor)
		if err != nil {
			return nil, "", err
		}
		where("(t.priority < ? or t.priority = ? and t.number > ?)", priority, priority, number)
	}
	limit := f.Limit
	if limit <= 0 {
		limit = defaultPage
	}
	limit = min(limit, largestPage)
	sql += fmt.Sprintf(" order by t.priority desc, t.number limit %d", limit+1)
	if page, err = query(ctx, q.pool, sql, args...); err != nil {
		return nil, "", err
	}
	if len(page) > limit {
		page = page[:limit]
		next = cursor(page[limit-1])
	}
	return page, next, nil
}

// cursor names the place after a task in the order of List: its priority's bits and its number.
func cursor(t Task) string {
	b := binary.BigEndian.AppendUint64(nil, math.Float64bits(t.Priority))
	return base64.RawURLEncoding.EncodeToString(binary.BigEndian.AppendUint64(b, uint64(t.Number)))
}

func readCursor(s string) (priority float64, number int64, err error) {
	b, err := base64.RawURLEncoding.DecodeString(s)
	if err != nil || len(b) != 16 {
		return 0, 0, fault.New(fault.Invalid, "cursor-malformed", "the cursor is not one that a page returned").WithField("cursor").
			WithNext("begin again without a cursor")
	}
	return math.Float64frombits(binary.BigEndian.Uint64(b)), int64(binary.BigEndian.Uint64(b[8:])), nil
}

// Event is one line of a task's history.
type Event struct {
	At     time.Time
	Task   int64
	Person string // "" when the program did it
	What   string // made, claimed, released, expired, extended, resolved, accepted, returned, assigned, unassigned, moved, overtaken
	Note   string
}

// History lists what happened to a task, oldest first.
func (q *Queue) History(ctx context.Context, volume string, number int64) ([]Event, error) {
	id, err := q.volume(ctx, volume)
	if err != nil {
		return nil, err
	}
	rows, err := q.pool.Query(ctx, `
		select at, number, coalesce(person, ''), what, note from task_event
		 where volume_id = $1 and number = $2 order by event`, id, number)
	if err != nil {
		return nil, err
	}
	events, err := pgx.CollectRows(rows, pgx.RowToStructByPos[Event])
	if err == nil && len(events) == 0 {
		err = unknownTask(number)
	}
	return events, err
}
