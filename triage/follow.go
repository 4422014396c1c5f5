package triage

import (
	"context"
	"errors"
	"slices"

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
	judged := make(map[ledger.ID]bool)
	for _, e := range entries {
		for _, id := range e.After {
			if gone[id] {
				continue
			}
			found, err := j.look(ctx, id)
			if err != nil {
				return err
			}
			judged[id] = true
			findings = append(findings, found...)
		}
	}
	kept, err := j.carry(ctx, retired, judged)
	if err != nil {
		return err
	}
	findings = append(findings, kept...)
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

// carry takes along suspected false splits that were judged from a segment which has not changed: only the name of the other
// has. The finding stands as long as its two supervoxels are in different segments. Where both have a nucleus now, the segment
// is judged again.
func (j *judge) carry(ctx context.Context, retired []ledger.ID, judged map[ledger.ID]bool) ([]Finding, error) {
	rows, err := j.volume.Pool().Query(ctx, findingColumns+`
		 where volume_id = $1 and retired is null and kind = $2 and segments && $3`, j.volume.ID(), FalseSplit, retired)
	if err != nil {
		return nil, err
	}
	old, err := pgx.CollectRows(rows, scanFinding)
	if err != nil || len(old) == 0 {
		return nil, err
	}
	var ends []ledger.ID
	for _, f := range old {
		ends = append(ends, f.Proposal.A, f.Proposal.B)
	}
	now, err := j.volume.SegmentsOf(ctx, ends, ledger.At{})
	if err != nil {
		return nil, err
	}
	var out []Finding
	for i, f := range old {
		a, err := j.segment(ctx, now[2*i])
		if err != nil {
			return nil, err
		}
		b, err := j.segment(ctx, now[2*i+1])
		if err != nil {
			return nil, err
		}
		at := smaller(a, b).ID
		if a.ID == b.ID || judged[at] {
			continue
		}
		if a.Nuclei > 0 && b.Nuclei > 0 { // which may be news, and says that they are two cells
			judged[at] = true
			found, err := j.look(ctx, at)
			if err != nil {
				return nil, err
			}
			out = append(out, found...)
			continue
		}
		f.Segments = []ledger.ID{a.ID, b.ID}
		slices.Sort(f.Segments)
		out = append(out, f)
	}
	return out, nil
}

// smaller is the segment of two from which a contact between them is judged.
func smaller(a, b ledger.Segment) ledger.Segment {
	if a.Supervoxels < b.Supervoxels || a.Supervoxels == b.Supervoxels && a.ID < b.ID {
		return a
	}
	return b
}
