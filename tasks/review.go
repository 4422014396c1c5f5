package tasks

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"strconv"
	"unicode/utf8"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

// ToReview lists what a person may review, oldest first: resolved tasks, their own left out.
func (q *Queue) ToReview(ctx context.Context, volume string, p Person, limit int) ([]Task, error) {
	if err := onlyFor(p, "review", Reviewer, Lead); err != nil {
		return nil, err
	}
	id, err := q.volume(ctx, volume)
	if err != nil {
		return nil, err
	}
	if limit <= 0 {
		limit = defaultPage
	}
	return query(ctx, q.pool, selectTasks+` and t.state = 'resolved' and c.person <> $2 order by c.ended_at, t.number limit $3`,
		id, p.Handle, min(limit, largestPage))
}

// Review accepts or returns a resolution, for anybody but the one who made it. Returning a correction posts its
// reversal, which is the entry in the answer; once triage has judged the segments again, the place is a new task. A
// returned "sound" or "unclear" becomes a new task at once. When later entries were built on the correction it can't
// be undone alone: fault.Conflict "later-entries" lists them, and the task goes on waiting for its review.
func (q *Queue) Review(ctx context.Context, volume string, number int64, p Person, verdict, note string) (Task, *ledger.Entry, error) {
	if err := onlyFor(p, "review", Reviewer, Lead); err != nil {
		return Task{}, nil, err
	}
	if verdict != Accept && verdict != Return {
		return Task{}, nil, fault.Newf(fault.Invalid, "verdict-unknown", "there is no verdict %q", verdict).WithField("verdict").
			WithNext("the verdicts are accept and return")
	}
	if utf8.RuneCountInString(note) > longestNote {
		return Task{}, nil, noteTooLong()
	}
	t, err := q.Get(ctx, volume, number)
	if err != nil {
		return Task{}, nil, err
	}
	if t.State == Resolved {
		err = q.review(ctx, t, p, verdict, note)
		if err != nil && pg.Constraint(err) != "task_resolved" {
			return Task{}, nil, whyNoReview(t, p, err)
		}
		if t, err = q.Get(ctx, volume, number); err != nil {
			return Task{}, nil, err
		}
	}
	if t.Review == nil || t.Review.Person != p.Handle || t.Review.Verdict != verdict {
		return Task{}, nil, notForReview(t)
	}
	if t.Review.Reversal == 0 {
		return t, nil, nil
	}
	e, err := q.entry(ctx, volume, t.Review.Reversal)
	return t, e, err
}

func notForReview(t Task) error {
	f := fault.Newf(fault.Conflict, "task-not-resolved", "task %d does not wait for a review: it is %s", t.Number, t.State)
	if t.Review != nil {
		f.Message += " by " + t.Review.Person
	}
	return f.WithNext("list what there is to review").WithData("state", t.State)
}

func ownWork(t Task) error {
	return fault.Newf(fault.Forbidden, "review-own", "task %d is your own work, and a second person has to look at it", t.Number).
		WithNext("ask another reviewer")
}

func whyNoReview(t Task, p Person, refusal error) error {
	switch pg.Constraint(refusal) {
	case "review_not_own":
		return ownWork(t)
	case "review_person_fkey":
		return unknownPerson(p.Handle)
	}
	return refusal
}

func (q *Queue) review(ctx context.Context, t Task, p Person, verdict, note string) error {
	if t.Resolution.Person == p.Handle {
		return ownWork(t)
	}
	switch {
	case verdict == Accept:
		id, err := q.volume(ctx, t.Volume)
		if err != nil {
			return err
		}
		_, err = q.pool.Exec(ctx, reviewSQL, id, t.Number, p.Handle, verdict, note, nil, nil)
		return err
	case t.Resolution.Outcome == Corrected:
		return q.undo(ctx, t, p, note)
	}
	return q.reopen(ctx, t, p, note)
}

const reviewSQL = `select task_review($1, $2, $3, $4, $5, $6, $7)`

// reopen returns a resolution that changed nothing: its place becomes a new task in the same transaction.
func (q *Queue) reopen(ctx context.Context, t Task, p Person, remark string) error {
	id, err := q.volume(ctx, t.Volume)
	if err != nil {
		return err
	}
	for range patience {
		from, err := position(ctx, q.pool, id)
		if err != nil {
			return err
		}
		places, err := q.placeNow(ctx, id, t, from)
		if err != nil {
			return err
		}
		err = q.alone(ctx, id, from, func(ctx context.Context, tx pgx.Tx) error {
			if _, err := tx.Exec(ctx, reviewSQL, id, t.Number, p.Handle, Return, remark, nil, nil); err != nil {
				return err
			}
			made, err := makeTasks(ctx, tx, id, places, fmt.Sprintf("again, after task %d was returned", t.Number))
			if err != nil {
				return err
			}
			_, err = tx.Exec(ctx, `select line_join($1, $2)`, id, made)
			return err
		})
		if !errors.Is(err, errMoved) {
			return err
		}
	}
	return queueBusy()
}

// placeNow is a task's place as it is now: as the task has it while its segments are current, else as triage sees it,
// and none if triage sees nothing wrong there any more, or somebody works on it already.
func (q *Queue) placeNow(ctx context.Context, id int32, t Task, followed int64) ([]triage.Place, error) {
	var stale, live bool
	err := q.pool.QueryRow(ctx, `
		select exists (select from segment where volume_id = $1 and segment_id = any ($2) and retired <= $3),
		       exists (select from task_key join task using (volume_id, number)
		                where volume_id = $1 and key = $4 and state in ('open', 'claimed'))`,
		id, t.Segments, followed, t.Key).Scan(&stale, &live)
	switch {
	case err != nil || live:
		return nil, err
	case !stale:
		return []triage.Place{t.place()}, nil
	}
	v, err := q.led.Volume(ctx, t.Volume)
	if err != nil {
		return nil, err
	}
	var now []ledger.ID
	for _, s := range t.Segments {
		became, err := v.Became(ctx, s)
		if err != nil {
			return nil, err
		}
		now = append(now, became...)
	}
	places, err := triage.Places(ctx, q.pool, v, now)
	return slices.DeleteFunc(places, func(p triage.Place) bool { return !slices.Contains(keysOf(p), t.Key) }), err
}

// undo posts the reversal of a task's correction, and the review with it. If somebody has reversed it before, theirs
// is the reversal.
func (q *Queue) undo(ctx context.Context, t Task, p Person, note string) error {
	v, err := q.led.Volume(ctx, t.Volume)
	if err != nil {
		return err
	}
	touched, err := undone(ctx, v, t.Resolution.Position)
	if err != nil {
		return err
	}
	id, err := uuid.NewV7()
	if err != nil {
		return err
	}
	reason := note
	if reason == "" {
		reason = "returned by the review of task " + strconv.FormatInt(t.Number, 10)
	}
	_, err = v.Post(ctx, ledger.Draft{
		ID: id, Person: p.Handle, Task: &t.ID, Reason: reason, Expected: touched,
		Reversal: &ledger.Reversal{Position: t.Resolution.Position},
	}, ledger.Companion{SQL: reviewSQL, Args: func(position int64) []any {
		return []any{v.ID(), t.Number, p.Handle, Return, note, position, touched}
	}})
	if pg.Constraint(err) == "segment_held" {
		return q.segmentHeld(ctx, v.ID(), p, touched, err)
	}
	if f, ok := fault.As(err); ok && f.Code == "already-reversed" {
		position, perr := strconv.ParseInt(fmt.Sprint(f.Data["position"]), 10, 64)
		if perr != nil {
			return err
		}
		_, err = q.pool.Exec(ctx, reviewSQL, v.ID(), t.Number, p.Handle, Return, note, position, nil)
	}
	return err
}

// undone lists the segments that a reversal would change: those that hold the ends of what the entry joined or cut.
func undone(ctx context.Context, v *ledger.Volume, position int64) ([]ledger.ID, error) {
	e, err := v.Entry(ctx, position)
	if err != nil {
		return nil, err
	}
	var ends []ledger.ID
	for _, pairs := range [][][2]ledger.ID{e.Joined.Contacts, e.Joined.Links, e.Cut.Contacts, e.Cut.Links} {
		for _, pair := range pairs {
			ends = append(ends, pair[0], pair[1])
		}
	}
	segments, err := v.SegmentsOf(ctx, ends, ledger.At{})
	slices.Sort(segments)
	return slices.Compact(segments), err
}
