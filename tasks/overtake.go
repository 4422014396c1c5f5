package tasks

import (
	"context"
	"encoding/json"
	"fmt"
	"slices"
	"strconv"
	"strings"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

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
	if err := rewrite(ctx, tx, volume, n, moving); err != nil {
		return nil, err
	}
	for _, t := range moving {
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

// rewrite stores what triage says of places now. There may be tens of thousands, when one giant false merge was cut.
func rewrite(ctx context.Context, tx pgx.Tx, volume int32, n news, moving []moved) error {
	k := len(moving)
	numbers, places, why := make([]int64, k), make([]triage.Place, k), make([]*string, k)
	segments, kind, family, key, said := make([]string, k), make([]string, k), make([]string, k), make([]string, k), make([]string, k)
	priority, probability, gain, minutes := make([]float64, k), make([]float64, k), make([]float64, k), make([]float64, k)
	findings, proposal, point := make([][]byte, k), make([]*json.RawMessage, k), make([]string, k)
	for i, t := range moving {
		p := t.place
		var err error
		if findings[i], proposal[i], err = evidence(p); err != nil {
			return err
		}
		numbers[i], places[i], segments[i], kind[i], family[i], key[i], said[i] = t.number, p, literal(p.Segments), p.Kind, p.Family, p.Key, p.Said
		priority[i], probability[i], gain[i], minutes[i] = p.Priority, p.Probability, p.Gain, p.Minutes
		point[i] = fmt.Sprintf("{%g,%g,%g}", p.Point[0], p.Point[1], p.Point[2])
		if !slices.Equal(p.Segments, t.segments) {
			by := n.why(t.live)
			why[i] = &by
		}
	}
	var b pgx.Batch
	b.Queue(`
		update task set segments = u.segments::bigint[], priority = u.priority, kind = u.kind, family = u.family
		  from unnest($2::bigint[], $3::text[], $4::float8[], $5::text[], $6::text[]) u (number, segments, priority, kind, family)
		 where volume_id = $1 and task.number = u.number`, volume, numbers, segments, priority, kind, family)
	b.Queue(`
		update task_place set place = u.key, probability = u.probability, gain = u.gain, minutes = u.minutes, point_nm = u.point::float8[],
		       said = u.said, findings = u.findings, proposal = u.proposal
		  from unnest($2::bigint[], $3::text[], $4::float8[], $5::float8[], $6::float8[], $7::text[], $8::text[], $9::jsonb[], $10::jsonb[])
		       u (number, key, probability, gain, minutes, point, said, findings, proposal)
		 where volume_id = $1 and task_place.number = u.number`,
		volume, numbers, key, probability, gain, minutes, point, said, findings, proposal)
	b.Queue(`
		insert into task_event (volume_id, number, what, note)
		select $1, n, 'moved', why from unnest($2::bigint[], $3::text[]) u (n, why) where why is not null`, volume, numbers, why)
	if err := tx.SendBatch(ctx, &b).Close(); err != nil {
		return err
	}
	return nameKeys(ctx, tx, volume, numbers, places)
}

// literal writes ids as a PostgreSQL array: arrays of unlike lengths can't travel as one array of arrays.
func literal(ids []ledger.ID) string {
	out := []byte{'{'}
	for i, id := range ids {
		if i > 0 {
			out = append(out, ',')
		}
		out = strconv.AppendInt(out, int64(id), 10)
	}
	return string(append(out, '}'))
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
