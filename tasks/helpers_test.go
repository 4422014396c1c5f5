package tasks

import (
	"context"
	"fmt"
	"testing"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

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
	b := &bench{Queue: NewQueue(ledger.New(pool), pool), t: t}
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
	task, err := b.Claim(b.t.Context(), ganglion, p, ClaimOptions{ID: newID(b.t)})
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

// get reads a task, or fails.
func (b *bench) get1(number int64) Task {
	b.t.Helper()
	task, err := b.Get(b.t.Context(), ganglion, number)
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
