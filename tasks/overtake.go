package tasks

import (
	"context"
	"maps"
	"slices"
	"strings"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

// live is an open or claimed task that the news concern.
type live struct {
	number   int64
	key      string
	segments []ledger.ID
	priority float64
	lined    bool // open, and in the lines
	claim    *uuid.UUID
}

// applyNews brings the tasks in line with what triage finds now. The caller has the queue lock alone.
func applyNews(ctx context.Context, tx pgx.Tx, volume int32, n news) (made int, err error) {
	found, err := liveTasks(ctx, tx, volume, n)
	if err != nil {
		return 0, err
	}
	var moved, gone []live
	for _, t := range found {
		place, still := n.places[t.key]
		switch {
		case !still:
			gone = append(gone, t)
		case place.Priority != t.priority || !slices.Equal(place.Segments, t.segments):
			moved = append(moved, t)
		}
	}
	if err := leave(ctx, tx, volume, slices.Concat(moved, gone)); err != nil {
		return 0, err
	}
	if err := overtake(ctx, tx, volume, n, gone); err != nil {
		return 0, err
	}
	joining, err := move(ctx, tx, volume, n, moved)
	if err != nil {
		return 0, err
	}
	for _, t := range found {
		delete(n.places, t.key)
	}
	fresh, err := unsettled(ctx, tx, volume, n.places)
	if err != nil {
		return 0, err
	}
	numbers, err := makeTasks(ctx, tx, volume, fresh, "")
	if err != nil {
		return 0, err
	}
	if _, err := tx.Exec(ctx, `select line_join($1, $2)`, volume, append(joining, numbers...)); err != nil {
		return 0, err
	}
	_, err = tx.Exec(ctx, `
		insert into follower (volume_id, name, position) values ($1, $2, $3)
		on conflict (volume_id, name) do update set position = excluded.position`, volume, follower, n.to)
	return len(numbers), err
}

// why names the entries that retired a task's segments, for its history.
func (n news) why(t live) string {
	var by []string
	for _, id := range t.segments {
		if e, ok := n.by[id]; ok && !slices.Contains(by, e) {
			by = append(by, e)
		}
	}
	return strings.Join(by, ", ")
}

// liveTasks finds the open and claimed tasks on retired segments, and those at the places that triage reports.
func liveTasks(ctx context.Context, tx pgx.Tx, volume int32, n news) ([]live, error) {
	rows, err := tx.Query(ctx, `
		with concerned as (
		     select number from task_line where volume_id = $1 and segment_id = any ($2)
		     union
		     select c.number from lease l join claim c using (claim_id) where l.volume_id = $1 and l.segment_id = any ($2)
		     union
		     select number from task where volume_id = $1 and state = 'open' and assigned_to is not null and segments && $2
		     union
		     select number from task_place where volume_id = $1 and place = any ($3) and latest)
		select t.number, p.place, t.segments, t.priority, t.state = 'open' and t.assigned_to is null, t.claim_id
		  from concerned join task t using (number) join task_place p using (volume_id, number)
		 where volume_id = $1 and t.state in ('open', 'claimed') order by number`, volume, n.retired, slices.Collect(maps.Keys(n.places)))
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, func(row pgx.CollectableRow) (t live, err error) {
		err = row.Scan(&t.number, &t.key, &t.segments, &t.priority, &t.lined, &t.claim)
		return t, err
	})
}

// leave takes tasks out of the lines, and claimed ones off their segments, so that they can be changed.
func leave(ctx context.Context, tx pgx.Tx, volume int32, tasks []live) error {
	var lined, claimed []int64
	for _, t := range tasks {
		switch {
		case t.lined:
			lined = append(lined, t.number)
		case t.claim != nil:
			claimed = append(claimed, t.number)
		}
	}
	if _, err := tx.Exec(ctx, `select line_leave($1, $2)`, volume, lined); err != nil {
		return err
	}
	_, err := tx.Exec(ctx, `select lease_end(t.claim_id, t, null) from task t where volume_id = $1 and number = any ($2)`, volume, claimed)
	return err
}

// overtake ends tasks whose place is gone, and the claims on them.
func overtake(ctx context.Context, tx pgx.Tx, volume int32, n news, gone []live) error {
	numbers, notes := make([]int64, len(gone)), make([]string, len(gone))
	for i, t := range gone {
		numbers[i], notes[i] = t.number, n.why(t)
	}
	var b pgx.Batch
	b.Queue(`update claim set ended = 'overtaken', ended_at = now() where volume_id = $1 and number = any ($2) and ended is null`, volume, numbers)
	b.Queue(`update task set state = 'overtaken' where volume_id = $1 and number = any ($2)`, volume, numbers)
	b.Queue(`
		insert into task_event (volume_id, number, what, note) select $1, n, 'overtaken', why from unnest($2::bigint[], $3::text[]) u (n, why)`,
		volume, numbers, notes)
	return tx.SendBatch(ctx, &b).Close()
}

// move gives tasks the segments and the worth that their places have now, and returns those that have to stand in
// lines. A claim goes along; only if somebody else's claim has come to the same segment, as after a merge of two that
// were in different hands, it ends.
func move(ctx context.Context, tx pgx.Tx, volume int32, n news, moved []live) (joining []int64, err error) {
	for _, t := range moved {
		p := n.places[t.key]
		findings, proposal, err := evidence(p)
		if err != nil {
			return nil, err
		}
		var b pgx.Batch
		b.Queue(`update task set segments = $3, priority = $4 where volume_id = $1 and number = $2`, volume, t.number, p.Segments, p.Priority)
		b.Queue(`
			update task_place set probability = $3, gain = $4, minutes = $5, point_nm = $6, said = $7, findings = $8, proposal = $9
			 where volume_id = $1 and number = $2`,
			volume, t.number, p.Probability, p.Gain, p.Minutes, p.Point, p.Said, findings, proposal)
		if !slices.Equal(p.Segments, t.segments) {
			b.Queue(`insert into task_event (volume_id, number, what, note) values ($1, $2, 'moved', $3)`, volume, t.number, n.why(t))
		}
		if err := tx.SendBatch(ctx, &b).Close(); err != nil {
			return nil, err
		}
		joins := t.lined
		if t.claim != nil {
			if err := tx.QueryRow(ctx, `select claim_move($1, $2)`, volume, t.number).Scan(&joins); err != nil {
				return nil, err
			}
		}
		if joins {
			joining = append(joining, t.number)
		}
	}
	return joining, nil
}

// unsettled leaves away the places that somebody found sound or unclear, and was not returned.
func unsettled(ctx context.Context, tx pgx.Tx, volume int32, places map[string]triage.Place) ([]triage.Place, error) {
	rows, err := tx.Query(ctx, `
		select p.place from task_place p join task t using (volume_id, number) join claim c using (claim_id)
		 where p.volume_id = $1 and p.place = any ($2) and p.latest and t.state in ('resolved', 'accepted') and c.outcome in ('sound', 'unclear')`,
		volume, slices.Collect(maps.Keys(places)))
	if err != nil {
		return nil, err
	}
	settled, err := pgx.CollectRows(rows, pgx.RowTo[string])
	if err != nil {
		return nil, err
	}
	for _, key := range settled {
		delete(places, key)
	}
	fresh := slices.Collect(maps.Values(places))
	slices.SortFunc(fresh, func(a, b triage.Place) int { return strings.Compare(a.Key, b.Key) })
	return fresh, nil
}
