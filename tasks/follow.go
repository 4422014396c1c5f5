package tasks

import (
	"context"
	"errors"
	"fmt"
	"slices"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

// Follow brings the tasks up to where triage has read, and returns that position. For the entries since:
//
//   - a task on a retired segment whose place triage still finds moves to the place's new segments; its number, its
//     assignment and its claim stay;
//   - one whose place is gone, or has become part of another's, is overtaken, and a claim on it ends;
//   - a new place becomes a new task, unless somebody found it sound or unclear before and was not returned.
//
// A place is the same while it has a finding with the same key.
//
// The first time, every place becomes a task. All of it, and the position, is one transaction.
func (q *Queue) Follow(ctx context.Context, v *ledger.Volume) (position int64, err error) {
	position, _, err = q.follow(ctx, v, false)
	return position, err
}

// Fill makes a task of every place that has none, not only of those that entries changed, and returns how many.
func (q *Queue) Fill(ctx context.Context, v *ledger.Volume) (made int, err error) {
	_, made, err = q.follow(ctx, v, true)
	return made, err
}

// news is what happened between the queue's position and triage's.
type news struct {
	from, to int64
	retired  []ledger.ID
	by       map[ledger.ID]string // the entry that retired a segment, for the history
	places   []triage.Place       // best first
}

func (q *Queue) follow(ctx context.Context, v *ledger.Volume, all bool) (position int64, made int, err error) {
	for range patience {
		n, err := readNews(ctx, v, all)
		if err != nil || n.from == n.to && !all {
			return n.to, 0, err
		}
		err = q.alone(ctx, v.ID(), n.from, func(ctx context.Context, tx pgx.Tx) error {
			made, err = applyNews(ctx, tx, v.ID(), n)
			return err
		})
		if errors.Is(err, errMoved) {
			continue
		}
		if err == nil && made >= manyMade {
			_, err = q.pool.Exec(ctx, `analyze task, task_place, task_key, task_line`)
		}
		return n.to, made, err
	}
	return 0, 0, queueBusy()
}

// manyMade is from how many new tasks on the planner is told at once, instead of when autovacuum comes round.
const manyMade = 1000

// readNews looks at one snapshot, before the queue lock is taken: what reads the ledger may have to wait for a group
// that is being posted, and a resolution in that group may wait for the queue lock.
func readNews(ctx context.Context, v *ledger.Volume, all bool) (n news, err error) {
	tx, err := v.Pool().BeginTx(ctx, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly})
	if err != nil {
		return n, err
	}
	defer func() { _ = tx.Rollback(context.WithoutCancel(ctx)) }()
	if n.from, err = position(ctx, tx, v.ID()); err != nil {
		return n, err
	}
	n.to, err = triage.Position(ctx, tx, v)
	if n.to = max(n.to, n.from); err != nil || n.to == n.from && !all {
		return n, err
	}
	born, err := n.entries(ctx, tx, v.ID())
	if err != nil {
		return n, err
	}
	switch {
	case all || n.from == nowhere:
		n.places, err = triage.Places(ctx, tx, v, nil)
	case len(born) > 0:
		n.places, err = triage.Places(ctx, tx, v, born)
	}
	for i := range n.places {
		n.places[i].Segments = segmentSet(n.places[i].Segments)
	}
	slices.SortStableFunc(n.places, better)
	return n, err
}

// entries reads which segments retired, and returns those that were born and are still there.
func (n *news) entries(ctx context.Context, tx pgx.Tx, volume int32) (born []ledger.ID, err error) {
	rows, err := tx.Query(ctx, `
		select position, person, before, after from entry where volume_id = $1 and position > $2 and position <= $3 order by position`,
		volume, n.from, n.to)
	if err != nil {
		return nil, err
	}
	n.by = make(map[ledger.ID]string)
	born = []ledger.ID{}
	var at int64
	var person string
	var before, after []ledger.ID
	_, err = pgx.ForEachRow(rows, []any{&at, &person, &before, &after}, func() error {
		for _, id := range before {
			n.by[id] = fmt.Sprintf("entry %d by %s", at, person)
		}
		n.retired = append(n.retired, before...)
		born = append(born, after...)
		return nil
	})
	return slices.DeleteFunc(born, func(id ledger.ID) bool { _, gone := n.by[id]; return gone }), err
}
