package tasks

import (
	"context"
	"fmt"
	"testing"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

// team is the people of every test here.
var (
	alder = Person{Handle: "alder", Roles: []Role{Proofreader}}
	birch = Person{Handle: "birch", Roles: []Role{Proofreader, Reviewer}}
	cedar = Person{Handle: "cedar", Roles: []Role{Reviewer}}
	rowan = Person{Handle: "rowan", Roles: []Role{Lead}}
)

const ganglion = "cricket-ganglion"

// bench is a queue on a volume without a base: enough for all that does not post.
type bench struct {
	*Queue
	t      testing.TB
	volume int32
	name   string
}

// newBench returns a queue with these places, the team, and nothing else. Its invariants are checked at the end.
func newBench(t testing.TB, places ...triage.Place) *bench {
	t.Helper()
	b := newBenchOn(t, pgtest.New(t))
	b.add(places...)
	t.Cleanup(func() { checkInvariants(t, b.pool) })
	return b
}

func newBenchOn(t testing.TB, pool *pgxpool.Pool) *bench {
	t.Helper()
	b := &bench{Queue: NewQueue(ledger.New(pool), pool), t: t, name: ganglion}
	err := pool.QueryRow(t.Context(), `
		insert into volume (name, voxel_nm, bounds_nm, seams, gaps, supervoxels, segments, contacts, rejected, assumed, synapses, nuclei,
		                    truth, has_truth, digest, mint_from, layout)
		values ($1, '{8,8,30}', '{0,0,0,1,1,1}', '[]', '[]', 1, 1, 0, 0, 0, 0, 0, 0, false, decode(repeat('00', 32), 'hex'), 1, 1)
		returning volume_id`, ganglion).Scan(&b.volume)
	if err != nil {
		t.Fatal(err)
	}
	addTeam(t, pool)
	return b
}

func addTeam(t testing.TB, pool *pgxpool.Pool) {
	t.Helper()
	people := NewPeople(pool)
	for _, p := range []Person{rowan, alder, birch, cedar} {
		if _, err := people.Add(t.Context(), Operator, p.Handle, p.Roles); err != nil {
			t.Fatal(err)
		}
	}
}

// add makes tasks of places, numbered on in order of priority.
func (b *bench) add(places ...triage.Place) {
	b.t.Helper()
	err := pg.InTx(b.t.Context(), b.pool, func(ctx context.Context, tx pgx.Tx) error {
		if err := lockAlone(ctx, tx, b.volume); err != nil {
			return err
		}
		numbers, err := makeTasks(ctx, tx, b.volume, places, "")
		if err != nil {
			return err
		}
		_, err = tx.Exec(ctx, `select line_join($1, $2)`, b.volume, numbers)
		return err
	})
	if err != nil {
		b.t.Fatal(err)
	}
}

// place is a suspicious place on some segments.
func place(priority float64, segments ...ledger.ID) triage.Place {
	return triage.Place{
		Key: fmt.Sprintf("bridge %g %v", priority, segments), Family: "bridge", Kind: "false-merge", Segments: segments,
		Probability: 0.5, Gain: 2 * priority, Minutes: 2, Priority: priority, Said: "a thin bridge",
	}
}

// take claims the next best task, or fails.
func (b *bench) take(p Person) Task {
	b.t.Helper()
	task, err := b.Claim(b.t.Context(), b.name, p, ClaimOptions{ID: newID(b.t)})
	if err != nil {
		b.t.Fatalf("%s claims: %v", p.Handle, err)
	}
	return task
}

// end resolves a task that needs no correction, or fails.
func (b *bench) end(p Person, task Task, outcome string) Task {
	b.t.Helper()
	task, _, err := b.Resolve(b.t.Context(), p, task.Claim.ID, Resolve{Outcome: outcome})
	if err != nil {
		b.t.Fatalf("%s resolves: %v", p.Handle, err)
	}
	return task
}

// oversleep makes a claim run out, without waiting for it.
func (b *bench) oversleep(task Task) {
	b.t.Helper()
	if _, err := b.pool.Exec(b.t.Context(), `update claim set until = now() - interval '1 second' where claim_id = $1`, task.Claim.ID); err != nil {
		b.t.Fatal(err)
	}
}

// read reads a task, or fails.
func (b *bench) read(number int64) Task {
	b.t.Helper()
	task, err := b.Get(b.t.Context(), b.name, number)
	if err != nil {
		b.t.Fatal(err)
	}
	return task
}

func newID(t testing.TB) uuid.UUID {
	t.Helper()
	id, err := uuid.NewV7()
	if err != nil {
		t.Fatal(err)
	}
	return id
}

// invariants are what must hold of the queue's tables whatever happened: each query finds what breaks one.
var invariants = map[string]string{
	"a task that stands in lines is open and nobody's": `
		select l.number from task_line l left join task t using (volume_id, number)
		 where t.state is distinct from 'open' or t.assigned_to is not null or not l.segment_id = any (t.segments) or l.priority <> t.priority`,
	"an open task that is nobody's stands in each of its lines": `
		select number from task t cross join lateral unnest(segments) s
		 where state = 'open' and assigned_to is null
		   and not exists (select from task_line l where l.volume_id = t.volume_id and l.number = t.number and l.segment_id = s)`,
	"waits counts the lines that a task isn't the head of": `
		select t.number from task t
		 where t.state = 'open' and t.assigned_to is null and t.waits <> (
		       select count(*) from unnest(t.segments) s
		        where exists (select from lease e where e.volume_id = t.volume_id and e.segment_id = s)
		           or exists (select from task_line l where l.volume_id = t.volume_id and l.segment_id = s
		                        and (l.priority > t.priority or l.priority = t.priority and l.number < t.number)))`,
	"an assigned task waits for no line": `
		select number from task where state = 'open' and assigned_to is not null and waits <> 0`,
	"leases are the segments of claimed tasks": `
		select number from task t cross join lateral unnest(segments) s
		 where state = 'claimed' and not exists (
		       select from lease l where l.volume_id = t.volume_id and l.segment_id = s and l.claim_id = t.claim_id)
		union all
		select c.number from lease l join claim c using (claim_id) left join task t on t.claim_id = c.claim_id
		 where c.ended is not null or t.state is distinct from 'claimed' or not l.segment_id = any (t.segments)`,
	"a live claim is a claimed task's": `
		select c.number from claim c left join task t on t.claim_id = c.claim_id
		 where c.ended is null and t.state is distinct from 'claimed'`,
	"a task's last event is its state": `
		select t.number from task t join lateral (
		       select what from task_event e where e.volume_id = t.volume_id and e.number = t.number
		        and what in ('made', 'claimed', 'released', 'expired', 'resolved', 'accepted', 'returned', 'overtaken')
		        order by event desc limit 1) e on true
		 where t.state <> case e.what when 'made' then 'open' when 'released' then 'open' when 'expired' then 'open' else e.what end`,
}

func checkInvariants(t testing.TB, pool *pgxpool.Pool) {
	t.Helper()
	for rule, sql := range invariants {
		rows, err := pool.Query(context.Background(), sql)
		if err != nil {
			t.Fatal(err)
		}
		broken, err := pgx.CollectRows(rows, pgx.RowTo[int64])
		if err != nil {
			t.Fatal(err)
		}
		if len(broken) > 0 {
			t.Errorf("%s: not so for tasks %v", rule, broken)
		}
	}
}

// want fails the test unless an error has this kind and code, and says what to do next.
func want(t testing.TB, err error, kind fault.Kind, code string) {
	t.Helper()
	f, ok := fault.As(err)
	if !ok || f.Kind != kind || f.Code != code {
		t.Errorf("got %v, want %s %s", err, kind, code)
	} else if f.Next == "" {
		t.Errorf("%s does not say what to do next", code)
	}
}

// refused fails the test unless the database itself refuses a statement under this rule.
func (b *bench) refused(rule, sql string, args ...any) {
	b.t.Helper()
	_, err := b.pool.Exec(b.t.Context(), sql, args...)
	if got := pg.Constraint(err); got != rule {
		b.t.Errorf("%s\nrefused by %q (%v), want %q", sql, got, err, rule)
	}
}

func first[T any](_ T, err error) error { return err }

func second[T, U any](_ T, _ U, err error) error { return err }

func numbersOf(tasks []Task) []int64 {
	out := make([]int64, len(tasks))
	for i, t := range tasks {
		out[i] = t.Number
	}
	return out
}

func (b *bench) release(p Person, task Task) Task {
	b.t.Helper()
	task, err := b.Release(b.t.Context(), p, task.Claim.ID, "later")
	if err != nil {
		b.t.Fatal(err)
	}
	return task
}

// hire adds a proofreader.
func (b *bench) hire(handle string) Person {
	b.t.Helper()
	p, err := NewPeople(b.pool).Add(b.t.Context(), Operator, handle, []Role{Proofreader})
	if err != nil {
		b.t.Fatal(err)
	}
	return p
}

// waits lists each task's count of lines that it isn't the head of, by number.
func (b *bench) waits() []int {
	b.t.Helper()
	rows, err := b.pool.Query(b.t.Context(), `select waits from task order by number`)
	if err != nil {
		b.t.Fatal(err)
	}
	waits, err := pgx.CollectRows(rows, pgx.RowTo[int])
	if err != nil {
		b.t.Fatal(err)
	}
	return waits
}

// left counts the tasks that are open or claimed.
func (b *bench) left() (n int) {
	b.t.Helper()
	if err := b.pool.QueryRow(b.t.Context(), `select count(*) from task where state in ('open', 'claimed')`).Scan(&n); err != nil {
		b.t.Error(err)
	}
	return n
}

// judge reviews a task, or fails.
func (b *bench) judge(p Person, number int64, verdict string) Task {
	b.t.Helper()
	task, _, err := b.Review(b.t.Context(), b.name, number, p, verdict, "")
	if err != nil {
		b.t.Fatal(err)
	}
	return task
}

// overtake ends an open task as an entry of somebody else would.
func (b *bench) overtake(number int64) {
	b.t.Helper()
	err := pg.InTx(b.t.Context(), b.pool, func(ctx context.Context, tx pgx.Tx) error {
		gone := []live{{number: number, lined: true}}
		if err := leave(ctx, tx, b.volume, nil, gone); err != nil {
			return err
		}
		return overtake(ctx, tx, b.volume, news{}, gone)
	})
	if err != nil {
		b.t.Fatal(err)
	}
}
