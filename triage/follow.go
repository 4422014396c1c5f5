package triage

import (
	"context"
	"errors"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/ledger"
)

// followed is how many entries are read at a time: the results of each batch are stored together.
const followed = 200

// Follow brings the findings up to the head of the ledger and returns the position reached: findings on retired segments go, and
// the segments that entries made, as far as they are still current, are judged again. Before the first full triage it does
// that. Any number of processes may follow: each batch is stored by one of them.
func Follow(ctx context.Context, v *ledger.Volume) (int64, error) {
	for {
		from, err := Position(ctx, v.Pool(), v)
		if err != nil {
			return from, err
		}
		if from == Nowhere {
			if err := Full(ctx, v, nil); err != nil && !errors.Is(err, errMoved) {
				return from, err
			}
			continue
		}
		entries, err := v.Entries(ctx, ledger.Filter{After: from, Limit: followed})
		if err != nil || len(entries) == 0 {
			return from, err
		}
		if err := followBatch(ctx, v, from, entries); err != nil && !errors.Is(err, errMoved) {
			return from, err
		}
	}
}

func followBatch(ctx context.Context, v *ledger.Volume, from int64, entries []ledger.Entry) error {
	to := entries[len(entries)-1].Position
	gone := make(map[ledger.ID]bool)
	var retired []ledger.ID
	for _, e := range entries {
		for _, id := range e.Before {
			gone[id] = true
			retired = append(retired, id)
		}
	}
	j, err := newJudge(ctx, v)
	if err != nil {
		return err
	}
	var findings []Finding
	for _, e := range entries {
		for _, id := range e.After {
			if gone[id] {
				continue
			}
			found, err := j.look(ctx, id)
			if err != nil {
				return err
			}
			findings = append(findings, found...)
		}
	}
	return pg.InTx(ctx, v.Pool(), func(ctx context.Context, tx pgx.Tx) error {
		if err := move(ctx, tx, v.ID(), from, to); err != nil {
			return err
		}
		if _, err := tx.Exec(ctx, `
			update finding set retired = greatest($3, made) where volume_id = $1 and retired is null and segments && $2`,
			v.ID(), retired, to); err != nil {
			return err
		}
		return store(ctx, tx, v.ID(), to, findings)
	})
}
