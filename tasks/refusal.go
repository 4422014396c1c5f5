package tasks

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/ledger"
)

// whyNot says why a claim was refused, in words that help to find another.
func (q *Queue) whyNot(ctx context.Context, id int32, volume string, p Person, opt ClaimOptions, refusal error) error {
	if errors.Is(refusal, pgx.ErrNoRows) {
		return q.empty(ctx, id, volume, opt)
	}
	switch pg.Constraint(refusal) {
	case "claim_proofreader":
		now, err := NewPeople(q.pool).Get(ctx, p.Handle)
		if err == nil {
			err = onlyFor(now, "claim tasks", Proofreader)
		}
		return cmp.Or(err, refusal)
	case "task_known":
		return unknownTask(opt.Task)
	case "task_settling":
		return fault.Newf(fault.Conflict, "task-settling", "a segment of task %d has just changed", opt.Task).
			WithNext("try again in a moment, when the tasks have followed").Wrap(refusal)
	}
	if opt.Task == 0 {
		return refusal
	}
	t, err := q.get(ctx, q.pool, id, opt.Task)
	if err != nil {
		return errors.Join(refusal, err)
	}
	const another = "claim another, or the next best"
	switch pg.Constraint(refusal) {
	case "task_open":
		f := fault.Newf(fault.Conflict, "task-not-open", "task %d is %s", t.Number, t.State)
		if t.Claim != nil {
			f.Message += " by " + t.Claim.Person
		}
		return f.WithNext(another).WithData("state", t.State)
	case "task_assigned":
		return fault.Newf(fault.Conflict, "task-assigned", "task %d is assigned to %s", t.Number, t.AssignedTo).
			WithNext(another).WithData("assigned_to", t.AssignedTo)
	case "segment_held":
		return q.segmentHeld(ctx, id, p, t.Segments, refusal)
	case "task_head":
		return q.behind(ctx, id, t, refusal)
	}
	return refusal
}

// empty says that nothing is left, and what stands in the way of what is.
func (q *Queue) empty(ctx context.Context, id int32, volume string, opt ClaimOptions) error {
	var waiting, assigned, held int
	err := q.pool.QueryRow(ctx, `
		select count(*) filter (where state = 'open' and assigned_to is null), count(*) filter (where state = 'open' and assigned_to is not null),
		       count(*) filter (where state = 'claimed')
		  from task where volume_id = $1 and state in ('open', 'claimed')
		   and ($2::text[] is null or kind = any ($2)) and ($3::text[] is null or family = any ($3))`,
		id, opt.Kinds, opt.Families).Scan(&waiting, &assigned, &held)
	if err != nil {
		return err
	}
	f := fault.Newf(fault.NotFound, "queue-empty", "volume %s has no task for you now: %d wait for a segment that is in use, %d are assigned to others, %d are being worked on",
		volume, waiting, assigned, held)
	if len(opt.Kinds)+len(opt.Families) > 0 {
		return f.WithNext("ask without a kind or family")
	}
	return f.WithNext("ask again when others have finished, or review what they resolved")
}

// segmentHeld names who else holds one of some segments.
func (q *Queue) segmentHeld(ctx context.Context, volume int32, p Person, segments []ledger.ID, refusal error) error {
	var person string
	var task int64
	var segment ledger.ID
	var until time.Time
	err := q.pool.QueryRow(ctx, `
		select c.person, c.number, l.segment_id, c.until from lease l join claim c using (claim_id)
		 where l.volume_id = $1 and l.segment_id = any ($2) and c.person <> $3 order by c.until desc limit 1`, volume, segments, p.Handle).
		Scan(&person, &task, &segment, &until)
	f := fault.New(fault.Conflict, "segment-held", "somebody else is working on a segment of this")
	switch {
	case err == nil:
		f.Message = fmt.Sprintf("%s is working on segment %s (task %d), until %s UTC at the latest", person, segment, task, until.UTC().Format(time.TimeOnly))
		f = f.WithData("person", person).WithData("task", task).WithData("segment", segment).WithData("until", until)
	case !errors.Is(err, pgx.ErrNoRows):
		return errors.Join(refusal, err)
	}
	return f.WithNext("wait until they have finished, and look at the segment again").Wrap(refusal)
}

// behind names the tasks that come before one in the lines of its segments.
func (q *Queue) behind(ctx context.Context, volume int32, t Task, refusal error) error {
	rows, err := q.pool.Query(ctx, `
		select distinct h.number from unnest($2::bigint[]) s cross join lateral task_head($1, s) h
		 where h.number <> $3 order by h.number`, volume, t.Segments, t.Number)
	if err != nil {
		return errors.Join(refusal, err)
	}
	before, err := pgx.CollectRows(rows, pgx.RowTo[int64])
	if err != nil {
		return errors.Join(refusal, err)
	}
	names := make([]string, len(before))
	for i, n := range before {
		names[i] = fmt.Sprint(n)
	}
	return fault.Newf(fault.Conflict, "task-waits", "task %d waits behind better ones on its segments: %s", t.Number, strings.Join(names, ", ")).
		WithNext("claim one of those first; what comes of it may answer this one too").WithData("before", before).Wrap(refusal)
}
