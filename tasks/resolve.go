package tasks

import (
	"context"
	"errors"
	"unicode/utf8"

	"github.com/google/uuid"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/ledger"
)

// Resolve is how a person ends a task.
type Resolve struct {
	Outcome string
	Note    string
	Draft   *ledger.Draft // of the correction: Merge or Split, Expected, Agent, Reason. ID, Person and Task are filled in here
}

// longestNote is in characters.
const longestNote = 2000

func (r Resolve) check() error {
	switch {
	case r.Outcome != Corrected && r.Outcome != Sound && r.Outcome != Unclear:
		return fault.Newf(fault.Invalid, "outcome-unknown", "there is no outcome %q", r.Outcome).WithField("outcome").
			WithNext("the outcomes are corrected, sound and unclear")
	case utf8.RuneCountInString(r.Note) > longestNote:
		return noteTooLong()
	case r.Outcome == Corrected && (r.Draft == nil || r.Draft.Merge == nil && r.Draft.Split == nil):
		return fault.New(fault.Invalid, "correction-missing", "\"corrected\" needs its correction, a merge or a split").WithField("outcome").
			WithNext("send the merge or the split along, or resolve as sound or unclear")
	case r.Outcome != Corrected && r.Draft != nil:
		return fault.Newf(fault.Invalid, "correction-unexpected", "%q leaves the segments as they are, and a correction came with it", r.Outcome).
			WithField("outcome").WithNext("resolve as corrected, or leave the correction away")
	}
	return nil
}

func noteTooLong() error {
	return fault.Newf(fault.Invalid, "note-long", "the note is longer than %d characters", longestNote).
		WithField("note").WithNext("say it shorter")
}

// Resolve ends a claim with an outcome. A correction's entry, the outcome and the end of the leases commit together,
// or none does. The same claim with the same outcome again gets the same answer.
//
// Ids that retired meanwhile are fault.Retired, with the current ids; the claim is still the person's then, and they
// may try again with those.
func (q *Queue) Resolve(ctx context.Context, p Person, claim uuid.UUID, r Resolve) (Task, *ledger.Entry, error) {
	if err := r.check(); err != nil {
		return Task{}, nil, err
	}
	if err := onlyFor(p, "resolve tasks", Proofreader); err != nil {
		return Task{}, nil, err
	}
	t, entry, err := q.resolve(ctx, p, claim, r)
	if err == nil {
		return t, entry, nil
	}
	// It may have been resolved before, or just now by an attempt whose answer was lost.
	c, found, ferr := q.findClaim(ctx, claim)
	switch {
	case ferr != nil:
		return Task{}, nil, errors.Join(err, ferr)
	case found && c.Person == p.Handle && c.Ended == EndedResolved && c.outcome == r.Outcome:
		return q.resolved(ctx, c)
	}
	return Task{}, nil, q.liveClaim(ctx, claim, err)
}

var resolveSQL = selectReturned(`claim_resolve($1, $2, $3, $4, null, null)`)

func (q *Queue) resolve(ctx context.Context, p Person, claim uuid.UUID, r Resolve) (t Task, e *ledger.Entry, err error) {
	if r.Outcome == Corrected {
		return q.correct(ctx, p, claim, r)
	}
	err = again(func() error {
		t, err = queryOne(ctx, q.pool, resolveSQL, claim, p.Handle, r.Outcome, r.Note)
		return err
	})
	return t, nil, err
}

// correct posts the correction of a claim's task. The entry gets the claim's id, so that the same request again finds
// it instead of posting it twice.
func (q *Queue) correct(ctx context.Context, p Person, claim uuid.UUID, r Resolve) (Task, *ledger.Entry, error) {
	c, err := q.heldClaim(ctx, p, claim)
	if err != nil {
		return Task{}, nil, err
	}
	v, err := q.led.Volume(ctx, c.name)
	if err != nil {
		return Task{}, nil, err
	}
	t, err := q.get(ctx, q.pool, c.volume, c.Task)
	if err != nil {
		return Task{}, nil, err
	}
	d := *r.Draft
	d.ID, d.Person, d.Task, d.Reversal = claim, p.Handle, &t.ID, nil
	if d.Reason == "" {
		d.Reason = r.Note
	}
	var e ledger.Entry
	err = again(func() error {
		e, err = v.Post(ctx, d, ledger.Companion{
			SQL:  `select from claim_resolve($1, $2, 'corrected', $3, $4, $5)`,
			Args: func(position int64) []any { return []any{claim, p.Handle, r.Note, position, d.Expected} },
		})
		return err
	})
	switch {
	case pg.Constraint(err) == "segment_held":
		return Task{}, nil, q.segmentHeld(ctx, c.volume, p, d.Expected, err)
	case pg.Constraint(err) == "claim_corrects":
		return Task{}, nil, fault.Newf(fault.Conflict, "correction-elsewhere", "the correction changes none of the segments of task %d", t.Number).
			WithNext("post it outside of the task, and resolve the task by what is true of its own segments").Wrap(err)
	case err != nil:
		return Task{}, nil, err
	}
	if t, err = q.get(ctx, q.pool, c.volume, c.Task); err != nil {
		return Task{}, nil, err
	}
	if t.Resolution == nil || t.Resolution.Position != e.Position {
		return Task{}, nil, fault.Newf(fault.Conflict, "entry-id-taken", "claim id %s is the id of an entry that is not this claim's", claim).
			WithNext("release the task, and claim it again under a new id")
	}
	return t, &e, nil
}

// resolved is the answer to a resolution that is stored.
func (q *Queue) resolved(ctx context.Context, c foundClaim) (Task, *ledger.Entry, error) {
	t, err := q.get(ctx, q.pool, c.volume, c.Task)
	if err != nil || c.position == 0 {
		return t, nil, err
	}
	e, err := q.entry(ctx, c.name, c.position)
	return t, e, err
}

func (q *Queue) entry(ctx context.Context, volume string, position int64) (*ledger.Entry, error) {
	v, err := q.led.Volume(ctx, volume)
	if err != nil {
		return nil, err
	}
	e, err := v.Entry(ctx, position)
	return &e, err
}

// Post appends a correction that belongs to no task. It is refused while somebody else holds a claim on a segment
// that it would change, since that person is looking at it. What somebody posted is undone by a reviewer, a lead or an agent.
func (q *Queue) Post(ctx context.Context, volume string, p Person, d ledger.Draft) (ledger.Entry, error) {
	may := []Role{Proofreader, Lead, Agent}
	if d.Reversal != nil {
		may = []Role{Reviewer, Lead, Agent}
	}
	if err := onlyFor(p, "post corrections", may...); err != nil {
		return ledger.Entry{}, err
	}
	v, err := q.led.Volume(ctx, volume)
	if err != nil {
		return ledger.Entry{}, err
	}
	d.Person = p.Handle
	e, err := v.Post(ctx, d, ledger.Companion{
		SQL:  `select segments_unheld($1, $2, $3)`,
		Args: func(int64) []any { return []any{v.ID(), p.Handle, d.Expected} },
	})
	if pg.Constraint(err) == "segment_held" {
		err = q.segmentHeld(ctx, v.ID(), p, d.Expected, err)
	}
	return e, err
}
