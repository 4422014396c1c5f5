package ledger

import (
	"context"
	"errors"
	"sync"
	"time"

	"github.com/jackc/pgx/v5/pgconn"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// Companion is a statement that commits together with an entry: a task's resolution, say. It must raise, or
// violate a constraint, when it does not apply; then the entry is not posted either.
type Companion struct {
	SQL  string
	Args func(position int64) []any
}

// groupLimit bounds how many entries share one transaction.
const groupLimit = 1000

// postTimeout bounds one group's transaction. Callers may have given up by then; their entry's id tells them later.
const postTimeout = 30 * time.Second

// postLine is where callers wait. Whoever finds nobody posting starts a poster; it takes all that wait, writes them
// in one transaction, and goes on until nobody waits.
type postLine struct {
	mu      sync.Mutex
	waiting []*waiting
	posting bool
}

type waiting struct {
	ctx        context.Context
	plan       *plan
	companions []Companion
	done       chan posted
}

type posted struct {
	entry Entry
	err   error
}

// Post appends the entry that a draft describes, and its companions with it, and returns when both are durable.
//
// The answer to ids that are retired is fault.Retired, with the current ids and the entries between. Posting the
// same draft again, with the same id, returns the entry that was stored the first time. When ctx ends early the
// entry may or may not have been posted: asking again with the same id tells.
func (v *Volume) Post(ctx context.Context, d Draft, companions ...Companion) (Entry, error) {
	p, err := v.plan(ctx, d)
	if err != nil {
		return v.already(ctx, d, err)
	}
	w := &waiting{ctx: ctx, plan: p, companions: companions, done: make(chan posted, 1)}
	v.line.mu.Lock()
	v.line.waiting = append(v.line.waiting, w)
	start := !v.line.posting
	v.line.posting = true
	v.line.mu.Unlock()
	if start {
		go v.postWaiting()
	}
	select {
	case r := <-w.done:
		if r.err != nil {
			return v.already(ctx, d, r.err)
		}
		return r.entry, nil
	case <-ctx.Done():
		return Entry{}, ctx.Err()
	}
}

// already looks whether a draft that was refused had been posted before, by its id; if not, the refusal stands.
func (v *Volume) already(ctx context.Context, d Draft, refusal error) (Entry, error) {
	e, err := v.entryByID(ctx, d.ID)
	switch {
	case err == nil && e.Person == d.Person && e.Volume == v.info.Name:
		return e, nil
	case err == nil:
		return Entry{}, fault.Newf(fault.Conflict, "entry-id-taken", "entry id %s belongs to another entry", d.ID).
			WithNext("make a new id for a new entry")
	case fault.KindOf(err) == fault.NotFound:
		return Entry{}, v.explain(ctx, refusal)
	}
	return Entry{}, errors.Join(refusal, err)
}

// postWaiting empties the line, group by group.
func (v *Volume) postWaiting() {
	for {
		v.line.mu.Lock()
		group := v.line.waiting
		if len(group) > groupLimit {
			group = group[:groupLimit:groupLimit]
		}
		v.line.waiting = v.line.waiting[len(group):]
		if len(group) == 0 {
			v.line.waiting, v.line.posting = nil, false
			v.line.mu.Unlock()
			return
		}
		v.line.mu.Unlock()
		v.mu.Lock()
		v.postGroup(group)
		v.mu.Unlock()
	}
}

// postGroup checks each member against the state including the ones before it, writes all in one transaction, and
// answers. If the transaction is refused the members are posted one by one, so that only the bad one fails. The
// caller holds the write lock.
func (v *Volume) postGroup(group []*waiting) {
	ctx, cancel := context.WithTimeout(context.Background(), postTimeout)
	defer cancel()
	for range 5 {
		members, changes := v.settleGroup(group)
		if len(members) == 0 {
			return
		}
		err := v.write(ctx, members, changes)
		if err == nil {
			for i, w := range members {
				w.done <- posted{entry: changes[i].entry}
			}
			return
		}
		for i := len(changes) - 1; i >= 0; i-- {
			v.state.retreat(changes[i])
		}
		var refused *pgconn.PgError
		switch {
		case pg.Constraint(err) == "ledger_advance":
			// Another process posted first. Read what it did and try again.
			if err := v.catchUp(ctx); err != nil {
				answerAll(members, err)
				return
			}
			group = members
		case !errors.As(err, &refused):
			v.recover(ctx, members, err)
			return
		case len(members) == 1:
			members[0].done <- posted{err: err}
			return
		default:
			for _, w := range members {
				v.postGroup([]*waiting{w})
			}
			return
		}
	}
	answerAll(group, fault.New(fault.Busy, "volume-busy", "other processes kept posting on this volume").WithNext("try again"))
}

// settleGroup advances the state by each member in turn and answers those that do not fit.
func (v *Volume) settleGroup(group []*waiting) (members []*waiting, changes []*change) {
	now := time.Now().UTC().Truncate(time.Microsecond)
	for _, w := range group {
		if err := w.ctx.Err(); err != nil {
			w.done <- posted{err: err}
			continue
		}
		c, err := v.state.settle(w.plan)
		if err != nil {
			w.done <- posted{err: err}
			continue
		}
		c.entry.Volume = v.info.Name
		c.entry.At = now
		if now.Before(v.state.last) {
			c.entry.At = v.state.last
		}
		if err := c.entry.seal(v.digest); err != nil {
			w.done <- posted{err: err}
			continue
		}
		v.state.advance(c)
		members, changes = append(members, w), append(changes, c)
	}
	return members, changes
}

// recover is what happens when the connection was lost while a commit was under way, so that nobody knows whether it
// took effect. It takes the head's lock, which waits for the dying transaction, reads the truth, and answers each
// member from it. Nothing is posted twice.
func (v *Volume) recover(ctx context.Context, members []*waiting, cause error) {
	if err := v.settled(ctx); err != nil {
		answerAll(members, errors.Join(cause, err))
		return
	}
	if err := v.catchUp(ctx); err != nil {
		answerAll(members, errors.Join(cause, err))
		return
	}
	for _, w := range members {
		e, err := v.entryByID(ctx, w.plan.draft.ID)
		if fault.KindOf(err) == fault.NotFound {
			err = fault.New(fault.Busy, "post-interrupted", "the connection to the database was lost before the entry was stored").
				WithNext("send it again with the same id").Wrap(cause)
		}
		w.done <- posted{entry: e, err: err}
	}
}

func answerAll(members []*waiting, err error) {
	for _, w := range members {
		w.done <- posted{err: err}
	}
}
