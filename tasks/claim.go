package tasks

import (
	"context"
	"errors"
	"time"
	"unicode/utf8"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// ClaimOptions narrow down what a person wants. Zero fields narrow nothing.
type ClaimOptions struct {
	Task     int64 // this one and no other
	Kinds    []string
	Families []string
	ID       uuid.UUID // the claim's own id, made by the caller, version 7: the same id again gets the same answer
}

// claimSQL is the hot statement: one call finds a task, leases its segments and claims it. What it spends its time on is
// the search in task_claim, which looks at heads alone and so does not depend on how many wait behind them. With
// 100,000 tasks and 100,000 changed segments (PostgreSQL 15; the buffers are those of 3,200 claims since a vacuum):
//
//	Limit (actual time=0.024..0.025 rows=1 loops=1)
//	  Buffers: shared hit=23
//	  ->  LockRows
//	        ->  Nested Loop Anti Join
//	              ->  Index Scan using task_ready on task x (actual time=0.016..0.016 rows=1 loops=1)
//	                    Index Cond: (volume_id = $1)
//	                    Buffers: shared hit=19
//	              ->  Index Scan using segment_pkey on segment g (actual time=0.004..0.004 rows=0 loops=1)
//	                    Index Cond: ((volume_id = $1) AND (segment_id = ANY (x.segments)))
//	                    Filter: (retired IS NOT NULL)
var claimSQL = selectReturned(`task_claim($1, $2, nullif($3, 0), $4, $5, $6, $7)`)

// Claim takes the best task that this person may have, those assigned to them first, or the one named. Nothing left:
// fault.NotFound "queue-empty". A person holds one task of a volume at a time; a second is fault.Conflict, and names
// the first.
func (q *Queue) Claim(ctx context.Context, volume string, p Person, opt ClaimOptions) (Task, error) {
	if err := onlyFor(p, "claim tasks", Proofreader); err != nil {
		return Task{}, err
	}
	id, err := q.volume(ctx, volume)
	if err != nil {
		return Task{}, err
	}
	if opt.ID == uuid.Nil {
		return Task{}, fault.New(fault.Invalid, "claim-id", "a claim needs an id of its own, so that a repeat is recognised").
			WithField("id").WithNext("make one, a UUID of version 7")
	}
	for range patience {
		t, err := queryOne(ctx, q.pool, claimSQL, id, p.Handle, opt.Task, opt.Kinds, opt.Families, opt.ID, q.Lease)
		if pg.Code(err) == deadlock {
			continue
		}
		if !errors.Is(err, pgx.ErrNoRows) && pg.Constraint(err) == "" {
			return t, err
		}
		c, repeated, ferr := q.findClaim(ctx, opt.ID)
		switch {
		case ferr != nil:
			return Task{}, errors.Join(err, ferr)
		case repeated:
			return q.repeat(ctx, id, p, c)
		case pg.Constraint(err) == "claim_one_a_person":
			if err := q.onlyOne(ctx, volume, p); err != nil {
				return Task{}, err
			}
		default:
			return Task{}, q.whyNot(ctx, id, volume, p, opt, err)
		}
	}
	return Task{}, queueBusy()
}

// repeat answers a request whose claim exists: the task, as it is now.
func (q *Queue) repeat(ctx context.Context, volume int32, p Person, c foundClaim) (Task, error) {
	if c.Person != p.Handle || c.volume != volume {
		return Task{}, fault.Newf(fault.Conflict, "claim-id-taken", "claim id %s belongs to another claim", c.ID).
			WithNext("make a new id for a new claim").WithField("id")
	}
	if c.Ended != "" {
		return Task{}, claimEnded(c)
	}
	return q.get(ctx, q.pool, volume, c.Task)
}

// onlyOne answers somebody who holds a task already. A claim that ran out does not hold them back: it is ended, and
// the answer is nil.
func (q *Queue) onlyOne(ctx context.Context, volume string, p Person) error {
	held, err := q.Held(ctx, volume, p)
	if err != nil || len(held) == 0 {
		return err
	}
	t := held[0]
	if ran, err := q.expire(ctx, t.Claim.ID); ran || err != nil {
		return err
	}
	return fault.Newf(fault.Conflict, "claim-held", "%s holds task %d already, until %s UTC", p.Handle, t.Number,
		t.Claim.Until.UTC().Format(time.TimeOnly)).
		WithNext("resolve or release it first").WithData("task", t.Number).WithData("claim", t.Claim.ID)
}

// Held lists the tasks in a person's hands.
func (q *Queue) Held(ctx context.Context, volume string, p Person) ([]Task, error) {
	id, err := q.volume(ctx, volume)
	if err != nil {
		return nil, err
	}
	return query(ctx, q.pool, selectTasks+` and c.volume_id = $1 and c.person = $2 and c.ended is null`, id, p.Handle)
}

// foundClaim is a claim with what it has to be held against.
type foundClaim struct {
	Claim
	volume   int32
	name     string // of the volume
	outcome  string
	position int64
}

func (q *Queue) findClaim(ctx context.Context, id uuid.UUID) (c foundClaim, found bool, err error) {
	c.ID = id
	err = q.pool.QueryRow(ctx, `
		select volume_id, name, number, person, claimed_at, until, ended_at, coalesce(ended, ''), coalesce(outcome, ''), coalesce(position, 0)
		  from claim join volume using (volume_id) where claim_id = $1`, id).
		Scan(&c.volume, &c.name, &c.Task, &c.Person, &c.At, &c.Until, &c.EndedAt, &c.Ended, &c.outcome, &c.position)
	if errors.Is(err, pgx.ErrNoRows) {
		return c, false, nil
	}
	return c, err == nil, err
}

// heldClaim is a claim that is live and this person's.
func (q *Queue) heldClaim(ctx context.Context, p Person, id uuid.UUID) (foundClaim, error) {
	c, found, err := q.findClaim(ctx, id)
	switch {
	case err != nil:
		return c, err
	case !found:
		return c, unknownClaim(id)
	case c.Person != p.Handle:
		return c, claimOfAnother()
	case c.Ended != "":
		return c, claimEnded(c)
	}
	return c, nil
}

// liveClaim explains why a claim could not be used by this person; other errors pass as they are.
func (q *Queue) liveClaim(ctx context.Context, id uuid.UUID, refusal error) error {
	switch pg.Constraint(refusal) {
	case "claim_known":
		return unknownClaim(id)
	case "claim_own":
		return claimOfAnother()
	case "claim_live":
		c, _, err := q.findClaim(ctx, id)
		if err != nil {
			return errors.Join(refusal, err)
		}
		return claimEnded(c)
	}
	return refusal
}

// OnVolume refuses a claim on another volume's task, as if there were no such claim.
func (q *Queue) OnVolume(ctx context.Context, volume string, claim uuid.UUID) error {
	c, found, err := q.findClaim(ctx, claim)
	if err == nil && found && c.name != volume {
		return unknownClaim(claim)
	}
	return err
}

func unknownClaim(id uuid.UUID) error {
	return fault.Newf(fault.NotFound, "claim-unknown", "there is no claim %s", id).WithNext("list the tasks that you hold")
}

func claimOfAnother() error {
	return fault.New(fault.Forbidden, "claim-of-another", "the claim is somebody else's").WithNext("use a claim of your own")
}

func claimEnded(c foundClaim) error {
	how := map[string]string{
		EndedResolved:  "you resolved it as " + c.outcome,
		EndedReleased:  "you gave it back",
		EndedExpired:   "its time ran out",
		EndedOvertaken: "somebody else's entry changed the place",
	}[c.Ended]
	return fault.Newf(fault.Gone, "claim-ended", "the claim on task %d has ended: %s", c.Task, how).
		WithNext("claim again").WithData("task", c.Task).WithData("ended", c.Ended)
}

// Extend gives a live claim a whole lease again, from now.
func (q *Queue) Extend(ctx context.Context, p Person, claim uuid.UUID) (Claim, error) {
	c := Claim{ID: claim}
	err := q.pool.QueryRow(ctx, `select number, person, claimed_at, until from claim_extend($1, $2, $3)`, claim, p.Handle, q.Lease).
		Scan(&c.Task, &c.Person, &c.At, &c.Until)
	if err != nil {
		return Claim{}, q.liveClaim(ctx, claim, err)
	}
	return c, nil
}

// Release gives a task back. Releasing it again does nothing.
func (q *Queue) Release(ctx context.Context, p Person, claim uuid.UUID, reason string) (Task, error) {
	if utf8.RuneCountInString(reason) > longestNote {
		return Task{}, noteTooLong()
	}
	err := again(func() error {
		_, err := q.pool.Exec(ctx, `select claim_give_up($1, $2, 'released', $3)`, claim, p.Handle, reason)
		return err
	})
	if err != nil && pg.Constraint(err) != "claim_live" {
		return Task{}, q.liveClaim(ctx, claim, err)
	}
	c, _, ferr := q.findClaim(ctx, claim)
	switch {
	case ferr != nil:
		return Task{}, ferr
	case c.Ended != EndedReleased:
		return Task{}, claimEnded(c)
	}
	return q.get(ctx, q.pool, c.volume, c.Task)
}

// expireBatch bounds how many claims one look finds.
const expireBatch = 100

// Expire gives back every task whose claim ran out, and says how many.
func (q *Queue) Expire(ctx context.Context) (int, error) {
	n := 0
	for {
		rows, err := q.pool.Query(ctx, `select claim_id from claim where ended is null and until <= now() order by until limit $1`, expireBatch)
		if err != nil {
			return n, err
		}
		ids, err := pgx.CollectRows(rows, pgx.RowTo[uuid.UUID])
		if err != nil {
			return n, err
		}
		for _, id := range ids {
			ran, err := q.expire(ctx, id)
			if err != nil {
				return n, err
			}
			if ran {
				n++
			}
		}
		if len(ids) < expireBatch {
			return n, nil
		}
	}
}

// expire ends one claim if it has run out. Somebody may have ended or extended it meanwhile: then it does nothing.
func (q *Queue) expire(ctx context.Context, claim uuid.UUID) (ran bool, err error) {
	err = again(func() error {
		return q.pool.QueryRow(ctx, `select claim_give_up($1, null, 'expired', '')`, claim).Scan(&ran)
	})
	if pg.Constraint(err) == "claim_live" {
		err = nil
	}
	return ran, err
}
