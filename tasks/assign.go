package tasks

import (
	"context"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// Assign gives open tasks to a person, and returns how many: those that are not open any more stay as they are. Only
// that person can claim an assigned task, and gets it before all others; it does not stand in the lines meanwhile.
func (q *Queue) Assign(ctx context.Context, volume string, lead Person, to string, numbers []int64) (int, error) {
	id, err := q.mayAssign(ctx, volume, lead)
	if err != nil {
		return 0, err
	}
	n := 0
	err = pg.InTx(ctx, q.pool, func(ctx context.Context, tx pgx.Tx) error {
		if err := lockAlone(ctx, tx, id); err != nil {
			return err
		}
		if err := assignable(ctx, tx, to); err != nil {
			return err
		}
		if err := allKnown(ctx, tx, id, numbers); err != nil {
			return err
		}
		n, err = assign(ctx, tx, id, lead, to, numbers)
		return err
	})
	return n, err
}

// AssignBest gives the n best open tasks that nobody has been given, of a kind and family if named, to a person.
func (q *Queue) AssignBest(ctx context.Context, volume string, lead Person, to string, n int, kind, family string) ([]int64, error) {
	id, err := q.mayAssign(ctx, volume, lead)
	if err != nil {
		return nil, err
	}
	if n < 1 || n > largestPage {
		return nil, fault.Newf(fault.Invalid, "assign-count", "%d is no number of tasks to assign", n).WithField("best").
			WithNext("assign from 1 to 1000 at a time")
	}
	var numbers []int64
	err = pg.InTx(ctx, q.pool, func(ctx context.Context, tx pgx.Tx) error {
		if err := lockAlone(ctx, tx, id); err != nil {
			return err
		}
		if err := assignable(ctx, tx, to); err != nil {
			return err
		}
		rows, err := tx.Query(ctx, `
			select number from task
			 where volume_id = $1 and state = 'open' and assigned_to is null and ($3 = '' or kind = $3) and ($4 = '' or family = $4)
			 order by priority desc, number limit $2`, id, n, kind, family)
		if err != nil {
			return err
		}
		if numbers, err = pgx.CollectRows(rows, pgx.RowTo[int64]); err != nil {
			return err
		}
		_, err = assign(ctx, tx, id, lead, to, numbers)
		return err
	})
	return numbers, err
}

// Unassign gives assigned open tasks back to everybody, and returns how many.
func (q *Queue) Unassign(ctx context.Context, volume string, lead Person, numbers []int64) (int, error) {
	id, err := q.mayAssign(ctx, volume, lead)
	if err != nil {
		return 0, err
	}
	var free []int64
	err = pg.InTx(ctx, q.pool, func(ctx context.Context, tx pgx.Tx) error {
		if err := lockAlone(ctx, tx, id); err != nil {
			return err
		}
		if err := allKnown(ctx, tx, id, numbers); err != nil {
			return err
		}
		rows, err := tx.Query(ctx, `
			update task set assigned_to = null
			 where volume_id = $1 and number = any ($2) and state = 'open' and assigned_to is not null returning number`, id, numbers)
		if err != nil {
			return err
		}
		if free, err = pgx.CollectRows(rows, pgx.RowTo[int64]); err != nil {
			return err
		}
		if _, err := tx.Exec(ctx, `select line_join($1, $2)`, id, free); err != nil {
			return err
		}
		return note(ctx, tx, id, free, lead.Handle, "unassigned", "")
	})
	return len(free), err
}

func (q *Queue) mayAssign(ctx context.Context, volume string, lead Person) (int32, error) {
	if err := onlyFor(lead, "assign tasks", Lead); err != nil {
		return 0, err
	}
	return q.volume(ctx, volume)
}

// assign does it, for tasks that are open. The caller has the queue lock alone.
func assign(ctx context.Context, tx pgx.Tx, volume int32, lead Person, to string, numbers []int64) (int, error) {
	if _, err := tx.Exec(ctx, `
		select line_leave($1, array_agg(number)) from task
		 where volume_id = $1 and number = any ($2) and state = 'open' and assigned_to is null`, volume, numbers); err != nil {
		return 0, err
	}
	rows, err := tx.Query(ctx, `
		update task set assigned_to = $3
		 where volume_id = $1 and number = any ($2) and state = 'open' and assigned_to is distinct from $3 returning number`,
		volume, numbers, to)
	if err != nil {
		return 0, err
	}
	given, err := pgx.CollectRows(rows, pgx.RowTo[int64])
	if err != nil {
		return 0, err
	}
	return len(given), note(ctx, tx, volume, given, lead.Handle, "assigned", to)
}

// assignable refuses people who could not work on what they are given.
func assignable(ctx context.Context, tx pgx.Tx, handle string) error {
	rows, err := tx.Query(ctx, `select `+personColumns+` from person where handle = $1`, handle)
	if err != nil {
		return err
	}
	p, err := known(handle)(pgx.CollectExactlyOneRow(rows, scanPerson))
	if err != nil {
		return err
	}
	if !p.Is(Proofreader) {
		return fault.Newf(fault.Conflict, "assignee-role", "%s is not a proofreader here", handle).WithField("to").
			WithNext("assign to a proofreader")
	}
	return nil
}

// allKnown refuses a list that names a task which does not exist.
func allKnown(ctx context.Context, tx pgx.Tx, volume int32, numbers []int64) error {
	rows, err := tx.Query(ctx, `
		select n from unnest($2::bigint[]) n where not exists (select from task where volume_id = $1 and number = n) limit 1`, volume, numbers)
	if err != nil {
		return err
	}
	missing, err := pgx.CollectRows(rows, pgx.RowTo[int64])
	if err == nil && len(missing) > 0 {
		err = unknownTask(missing[0])
	}
	return err
}

// note writes one line into the history of each of some tasks. who is "" for the program itself.
func note(ctx context.Context, tx pgx.Tx, volume int32, numbers []int64, who, what, text string) error {
	_, err := tx.Exec(ctx, `
		insert into task_event (volume_id, number, person, what, note) select $1, n, nullif($3, ''), $4, $5 from unnest($2::bigint[]) n`,
		volume, numbers, who, what, text)
	return err
}
