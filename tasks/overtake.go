package tasks

import (
	"cmp"
	"context"
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
	keys     []string // of the findings it was made of, its place's own first
	segments []ledger.ID
	priority float64
	lined    bool // open, and in the lines
	claim    *uuid.UUID
}

// moved is a live task and the place that it is about from now on.
type moved struct {
	live
	place triage.Place
}

// applyNews brings the tasks in line with what triage finds now. The caller has the queue lock alone.
func applyNews(ctx context.Context, tx pgx.Tx, volume int32, n news) (made int, err error) {
	found, err := liveTasks(ctx, tx, volume, n)
	if err != nil {
		return 0, err
	}
	moving, gone, places := match(found, n.places)
	if err := leave(ctx, tx, volume, moving, gone); err != nil {
		return 0, err
	}
	if err := overtake(ctx, tx, volume, n, gone); err != nil {
		return 0, err
	}
	joining, err := move(ctx, tx, volume, n, moving)
	if err != nil {
		return 0, err
	}
	if places, err = unsettled(ctx, tx, volume, places); err != nil {
		return 0, err
	}
	numbers, err := makeTasks(ctx, tx, volume, places, "")
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

// match finds the task of each place, the best place first: one in somebody's hands before others, then one that has
// the place's own key, then the oldest. What remains are tasks whose place is gone, and places without a task. A task
// that has nothing to change is in neither.
func match(found []live, places []triage.Place) (moving []moved, gone []live, rest []triage.Place) {
	byKey := make(map[string][]int)
	for i, t := range found {
		for _, key := range t.keys {
			byKey[key] = append(byKey[key], i)
		}
	}
	taken := make([]bool, len(found))
	for _, p := range places {
		best := -1
		for _, key := range keysOf(p) {
			for _, i := range byKey[key] {
				if !taken[i] && (best < 0 || closer(found[i], found[best], p)) {
					best = i
				}
			}
		}
		if best < 0 {
			rest = append(rest, p)
			continue
		}
		taken[best] = true
		if t := found[best]; p.Priority != t.priority || p.Key != t.keys[0] || !slices.Equal(p.Segments, t.segments) {
			moving = append(moving, moved{t, p})
		}
	}
	for i, t := range found {
		if !taken[i] {
			gone = append(gone, t)
		}
	}
	slices.SortFunc(moving, func(a, b moved) int { return cmp.Compare(a.number, b.number) })
	return moving, gone, rest
}

func closer(a, b live, p triage.Place) bool {
	switch {
	case (a.claim != nil) != (b.claim != nil):
		return a.claim != nil
	case (a.keys[0] == p.Key) != (b.keys[0] == p.Key):
		return a.keys[0] == p.Key
	}
	return a.number < b.number
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
	var keys []string
	for _, p := range n.places {
		keys = append(keys, keysOf(p)...)
	}
	rows, err := tx.Query(ctx, `
		with concerned as (
		     select number from task_line where volume_id = $1 and segment_id = any ($2)
		     union
		     select c.number from lease l join claim c using (claim_id) where l.volume_id = $1 and l.segment_id = any ($2)
		     union
		     select number from task where volume_id = $1 and state = 'open' and assigned_to is not null and segments && $2
		     union
		     select number from task_key where volume_id = $1 and key = any ($3))
		select number, place || array (select key from task_key k where k.volume_id = $1 and k.number = t.number and key <> place order by key),
		       segments, priority, state = 'open' and assigned_to is null, claim_id
		  from concerned join task t using (number) join task_place using (volume_id, number)
		 where volume_id = $1 and state in ('open', 'claimed') order by number`, volume, n.retired, keys)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, func(row pgx.CollectableRow) (t live, err error) {
		err = row.Scan(&t.number, &t.keys, &t.segments, &t.priority, &t.lined, &t.claim)
		return t, err
	})
}

// leave takes tasks out of the lines, and claimed ones off their segments, so that they can be changed.
func leave(ctx context.Context, tx pgx.Tx, volume int32, moving []moved, gone []live) error {
	tasks := slices.Clone(gone)
	for _, m := range moving {
		tasks = append(tasks, m.live)
	}
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
func move(ctx context.Context, tx pgx.Tx, volume int32, n news, moving []moved) (joining []int64, err error) {
	numbers, places := make([]int64, len(moving)), make([]triage.Place, len(moving))
	for i, t := range moving {
		p := t.place
		numbers[i], places[i] = t.number, p
		findings, proposal, err := evidence(p)
		if err != nil {
			return nil, err
		}
		var b pgx.Batch
		b.Queue(`update task set segments = $3::bigint[], priority = $4::float8, kind = $5::text, family = $6 where volume_id = $1 and number = $2`,
			volume, t.number, p.Segments, p.Priority, p.Kind, p.Family)
		b.Queue(`
			update task_place set probability = $3, gain = $4, minutes = $5, point_nm = $6, said = $7, findings = $8, proposal = $9, place = $10
			 where volume_id = $1 and number = $2`,
			volume, t.number, p.Probability, p.Gain, p.Minutes, p.Point, p.Said, findings, proposal, p.Key)
		if !slices.Equal(p.Segments, t.segments) {
			b.Queue(`insert into task_event (volume_id, number, what, note) values ($1, $2, 'moved', $3)`, volume, t.number, n.why(t.live))
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
	return joining, nameKeys(ctx, tx, volume, numbers, places)
}

// unsettled leaves away the places that somebody found sound or unclear, and was not returned: those whose weightiest
// finding was there then, and those that have no finding but from then.
func unsettled(ctx context.Context, tx pgx.Tx, volume int32, places []triage.Place) ([]triage.Place, error) {
	var keys []string
	for _, p := range places {
		keys = append(keys, keysOf(p)...)
	}
	rows, err := tx.Query(ctx, `
		select key from task_key join task using (volume_id, number) join claim using (claim_id)
		 where task_key.volume_id = $1 and key = any ($2) and state in ('resolved', 'accepted') and outcome in ('sound', 'unclear')`, volume, keys)
	if err != nil {
		return nil, err
	}
	settled := make(map[string]bool)
	var key string
	if _, err := pgx.ForEachRow(rows, []any{&key}, func() error { settled[key] = true; return nil }); err != nil {
		return nil, err
	}
	return slices.DeleteFunc(places, func(p triage.Place) bool {
		return settled[p.Key] || !slices.ContainsFunc(keysOf(p), func(key string) bool { return !settled[key] })
	}), nil
}
