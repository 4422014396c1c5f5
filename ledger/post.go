package ledger

import (
	"context"
	"errors"
	"runtime"
	"sync"
	"time"

	"github.com/google/uuid"
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
	id         uuid.UUID
	plan       func(s *state) (*plan, error) // worked out beforehand, or on the state when the turn has come
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
	plan, err := v.planLater(ctx, d)
	if err != nil {
		return v.already(ctx, d, err)
	}
	w := &waiting{ctx: ctx, id: d.ID, plan: plan, companions: companions, done: make(chan posted, 1)}
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

// gatherMost bounds how long the poster waits for those whom it has just answered to line up again. Without it, half of many
// writers would always wait for the other half, and groups would be half as large.
const gatherMost = 300 * time.Microsecond

// take waits until as many wait as are expected, or no longer, and takes them off the line. When nobody waits the poster ends.
func (l *postLine) take(expected int) []*waiting {
	for until := time.Now().Add(gatherMost); expected > 0; runtime.Gosched() {
		l.mu.Lock()
		n := len(l.waiting)
		l.mu.Unlock()
		if n >= expected || time.Now().After(until) {
			break
		}
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	group := l.waiting
	if len(group) > groupLimit {
		group = group[:groupLimit:groupLimit]
	}
	if l.waiting = l.waiting[len(group):]; len(group) == 0 {
		l.waiting, l.posting = nil, false
	}
	return group
}

// postWaiting empties the line, group by group.
func (v *Volume) postWaiting() {
	expected := 0
	for {
		group := v.line.take(expected)
		if len(group) == 0 {
			return
		}
		v.mu.Lock()
		v.postGroup(group)
		v.mu.Unlock()
		if expected = 0; len(group) > 1 {
			v.line.mu.Lock()
			expected = min(len(group)+len(v.line.waiting), groupLimit)
			v.line.mu.Unlock()
		}
	}
}

// planLater prepares a draft for its turn. A merge is worked out when the turn has come, because that costs next to nothing and
// needs no look at the database now; a split or a reversal is worked out here, beside other work.
func (v *Volume) planLater(ctx context.Context, d Draft) (func(*state) (*plan, error), error) {
	if err := d.check(); err != nil {
		return nil, err
	}
	if d.Merge != nil {
		ord, err := v.ordinals([]ID{d.Merge.A, d.Merge.B})
		return func(s *state) (*plan, error) { return s.planMerge(d, ord[0], ord[1]) }, err
	}
	p, err := v.plan(ctx, d)
	return func(*state) (*plan, error) { return p, nil }, err
}

// postTries bounds how often a group gives way to other processes.
const postTries = 5

// postGroup checks each member against the state including the ones before it, writes all in one transaction, and answers. A
// refusal stands once the write has proved, by its compare and set, that the state was the database's; before that another
// process may have made it out of date. If the database refuses the transaction, the members are posted one by one, so that
// only the bad one fails. The caller holds the write lock.
func (v *Volume) postGroup(group []*waiting) {
	ctx, cancel := context.WithTimeout(context.Background(), postTimeout)
	defer cancel()
	for range postTries {
		members, changes, refused := v.settleGroup(group)
		if len(members) == 0 {
			if group = v.refuse(ctx, refused); len(group) == 0 {
				return
			}
			continue
		}
		err := v.write(ctx, members, changes)
		if err == nil {
			for i, w := range members {
				w.done <- posted{entry: changes[i].entry}
			}
			for _, r := range refused {
				r.w.done <- posted{err: r.err}
			}
			return
		}
		for i := len(changes) - 1; i >= 0; i-- {
			v.state.retreat(changes[i])
		}
		if group = v.failed(ctx, members, refused, err); len(group) == 0 {
			return
		}
	}
	answerAll(group, fault.New(fault.Busy, "volume-busy", "other processes kept posting on this volume").WithNext("try again"))
}

// refusal is a member that does not fit the state as it is here.
type refusal struct {
	w   *waiting
	err error
}

func withRefused(members []*waiting, refused []refusal) []*waiting {
	for _, r := range refused {
		members = append(members, r.w)
	}
	return members
}

// refuse answers refusals when the state is the database's; else it brings the state up to date, and those are to be tried again.
func (v *Volume) refuse(ctx context.Context, refused []refusal) (again []*waiting) {
	was := v.state.position
	if err := v.catchUp(ctx); err != nil {
		answerAll(withRefused(nil, refused), err)
		return nil
	}
	if v.state.position != was {
		return withRefused(nil, refused)
	}
	for _, r := range refused {
		r.w.done <- posted{err: r.err}
	}
	return nil
}

// failed deals with a group that was not written, and returns whom to try again.
func (v *Volume) failed(ctx context.Context, members []*waiting, refused []refusal, err error) (again []*waiting) {
	all := withRefused(members, refused)
	var said *pgconn.PgError
	switch {
	case pg.Constraint(err) == "ledger_advance":
		// Another process posted first. Read what it did and try again.
		if err := v.catchUp(ctx); err != nil {
			answerAll(all, err)
			return nil
		}
		return all
	case !errors.As(err, &said):
		v.recover(ctx, members, err)
		return withRefused(nil, refused)
	case len(members) == 1:
		members[0].done <- posted{err: err}
		return withRefused(nil, refused)
	}
	for _, w := range all {
		v.postGroup([]*waiting{w})
	}
	return nil
}

// settleGroup advances the state by each member in turn, and tells those that do not fit it.
func (v *Volume) settleGroup(group []*waiting) (members []*waiting, changes []*change, refused []refusal) {
	now := time.Now().UTC().Truncate(time.Microsecond)
	for _, w := range group {
		if err := w.ctx.Err(); err != nil {
			w.done <- posted{err: err}
			continue
		}
		c, err := v.settleOne(w, now)
		if err != nil {
			refused = append(refused, refusal{w, err})
			continue
		}
		v.state.advance(c)
		members, changes = append(members, w), append(changes, c)
	}
	return members, changes, refused
}

func (v *Volume) settleOne(w *waiting, now time.Time) (*change, error) {
	p, err := w.plan(v.state)
	if err != nil {
		return nil, err
	}
	c, err := v.state.settle(p)
	if err != nil {
		return nil, err
	}
	c.entry.Volume, c.entry.At = v.info.Name, now
	if now.Before(v.state.last) {
		c.entry.At = v.state.last
	}
	return c, c.entry.seal(v.digest)
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
		e, err := v.entryByID(ctx, w.id)
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
