package triage

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/ledger"
)

// follower is triage's name among the ledger's followers.
const follower = "triage"

// Nowhere is the position of a follower that has not begun.
const Nowhere = -1

// Position tells how far triage has read; Nowhere before the first full triage.
func Position(ctx context.Context, db pg.DB, v *ledger.Volume) (int64, error) {
	var p int64
	err := db.QueryRow(ctx, `select position from follower where volume_id = $1 and name = $2`, v.ID(), follower).Scan(&p)
	if errors.Is(err, pgx.ErrNoRows) {
		return Nowhere, nil
	}
	return p, err
}

// errMoved says that another process has followed in the meantime.
var errMoved = errors.New("triage: somebody else has moved on")

// move sets triage's position, if it still is where the caller saw it.
func move(ctx context.Context, tx pgx.Tx, volume int32, from, to int64) error {
	if from == Nowhere {
		tag, err := tx.Exec(ctx, `
			insert into follower (volume_id, name, position) values ($1, $2, $3) on conflict do nothing`, volume, follower, to)
		if err == nil && tag.RowsAffected() == 0 {
			err = errMoved
		}
		return err
	}
	tag, err := tx.Exec(ctx, `
		update follower set position = $4 where volume_id = $1 and name = $2 and position = $3`, volume, follower, from, to)
	if err == nil && tag.RowsAffected() == 0 {
		err = errMoved
	}
	return err
}

// store keeps findings. One that names a place which the same detector had named before replaces it.
func store(ctx context.Context, tx pgx.Tx, volume int32, position int64, findings []Finding) error {
	const batch = 500
	for len(findings) > 0 {
		n := min(batch, len(findings))
		var b pgx.Batch
		for _, f := range findings[:n] {
			evidence, err := json.Marshal(f.Evidence)
			if err != nil {
				return err
			}
			var proposal []byte
			if f.Proposal != nil {
				if proposal, err = json.Marshal(f.Proposal); err != nil {
					return err
				}
			}
			b.Queue(`
				insert into finding (volume_id, detector, family, kind, place, segments, point_nm, evidence, said, probability, moves, gain, proposal, made)
				values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14)
				on conflict (volume_id, detector, place) where retired is null
				do update set segments = excluded.segments, point_nm = excluded.point_nm, evidence = excluded.evidence, said = excluded.said,
				              probability = excluded.probability, moves = excluded.moves, gain = excluded.gain, proposal = excluded.proposal, made = excluded.made`,
				volume, f.Detector, f.Family, f.Kind, f.Key, f.Segments, f.Point[:], evidence, f.Said, f.Probability, f.Moves, f.Gain, proposal, position)
		}
		if err := tx.SendBatch(ctx, &b).Close(); err != nil {
			return fmt.Errorf("store findings: %w", err)
		}
		findings = findings[n:]
	}
	return nil
}

const findingColumns = `
	select finding_id, detector, family, kind, place, segments, point_nm, evidence, said, probability, moves, gain, proposal from finding`

func scanFinding(row pgx.CollectableRow) (Finding, error) {
	var f Finding
	var point []float64
	var evidence, proposal []byte
	err := row.Scan(&f.ID, &f.Detector, &f.Family, &f.Kind, &f.Key, &f.Segments, &point, &evidence, &f.Said, &f.Probability, &f.Moves, &f.Gain, &proposal)
	if err != nil {
		return f, err
	}
	copy(f.Point[:], point)
	if err := json.Unmarshal(evidence, &f.Evidence); err != nil {
		return f, err
	}
	if proposal != nil {
		f.Proposal = new(Proposal)
		err = json.Unmarshal(proposal, f.Proposal)
	}
	return f, err
}

// Filter chooses current findings. Zero fields choose all.
type Filter struct {
	Detector string
	Family   string
	Kind     string
	Segment  ledger.ID
	Before   *Mark // continue after the finding that an earlier answer ended with
	Limit    int   // 0: 100
}

// Mark is where a list of findings goes on: they are in order of gain.
type Mark struct {
	Gain float64
	ID   int64
}

// Findings lists current findings, most gain first.
func Findings(ctx context.Context, v *ledger.Volume, f Filter) ([]Finding, error) {
	if f.Limit <= 0 {
		f.Limit = 100
	}
	sql := findingColumns + ` where volume_id = $1 and retired is null`
	args := []any{v.ID()}
	add := func(cond string, values ...any) {
		at := make([]any, len(values))
		for i, value := range values {
			args = append(args, value)
			at[i] = len(args)
		}
		sql += " and " + fmt.Sprintf(cond, at...)
	}
	if f.Detector != "" {
		add("detector = $%d", f.Detector)
	}
	if f.Family != "" {
		add("family = $%d", f.Family)
	}
	if f.Kind != "" {
		add("kind = $%d", f.Kind)
	}
	if f.Segment != 0 {
		add("segments @> $%d", []ledger.ID{f.Segment})
	}
	if f.Before != nil {
		add("(gain, -finding_id) < ($%d, -$%d::bigint)", f.Before.Gain, f.Before.ID)
	}
	args = append(args, f.Limit)
	sql += fmt.Sprintf(" order by gain desc, finding_id limit $%d", len(args))
	rows, err := v.Pool().Query(ctx, sql, args...)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, scanFinding)
}

// Places groups the current findings, or those that touch some segments.
func Places(ctx context.Context, db pg.DB, v *ledger.Volume, segments []ledger.ID) ([]Place, error) {
	sql, args := findingColumns+` where volume_id = $1 and retired is null`, []any{v.ID()}
	if segments != nil {
		sql, args = sql+` and segments && $2`, append(args, segments)
	}
	rows, err := db.Query(ctx, sql, args...)
	if err != nil {
		return nil, err
	}
	findings, err := pgx.CollectRows(rows, scanFinding)
	if err != nil {
		return nil, err
	}
	return Group(findings), nil
}
