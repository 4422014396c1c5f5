package tasks

import (
	"context"
	"encoding/json"
	"slices"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

// place is the place of a task, as triage would have said it.
func (t Task) place() triage.Place {
	return triage.Place{
		Key: t.Key, Family: t.Family, Kind: t.Kind, Segments: t.Segments, Point: t.Point, Findings: t.Findings,
		Probability: t.Probability, Gain: t.Gain, Minutes: t.Minutes, Priority: t.Priority, Proposal: t.Proposal, Said: t.Said,
	}
}

// segmentSet is a place's segments as a task holds them: ascending, each once.
func segmentSet(ids []ledger.ID) []ledger.ID {
	out := slices.Clone(ids)
	slices.Sort(out)
	return slices.Compact(out)
}

// makeTasks stores new open tasks, numbered on from the last, best first. They don't stand in their lines yet. The
// caller has the queue lock alone, and no live task is about any of the places.
func makeTasks(ctx context.Context, tx pgx.Tx, volume int32, places []triage.Place, why string) ([]int64, error) {
	if len(places) == 0 {
		return nil, nil
	}
	var last int64
	if err := tx.QueryRow(ctx, `select coalesce(max(number), 0) from task where volume_id = $1`, volume).Scan(&last); err != nil {
		return nil, err
	}
	places = slices.Clone(places)
	slices.SortStableFunc(places, better)
	numbers, keys := make([]int64, len(places)), make([]string, len(places))
	for i, p := range places {
		numbers[i], keys[i] = last+1+int64(i), p.Key
	}
	if _, err := tx.Exec(ctx, `update task_place set latest = false where volume_id = $1 and place = any ($2) and latest`, volume, keys); err != nil {
		return nil, err
	}
	_, err := tx.CopyFrom(ctx, pgx.Identifier{"task"}, []string{"volume_id", "number", "priority", "kind", "family", "segments"},
		pgx.CopyFromSlice(len(places), func(i int) ([]any, error) {
			p := places[i]
			return []any{volume, numbers[i], p.Priority, p.Kind, p.Family, segmentSet(p.Segments)}, nil
		}))
	if err != nil {
		return nil, err
	}
	_, err = tx.CopyFrom(ctx, pgx.Identifier{"task_place"},
		[]string{"volume_id", "number", "task_id", "place", "probability", "gain", "minutes", "point_nm", "said", "findings", "proposal"},
		pgx.CopyFromSlice(len(places), func(i int) ([]any, error) {
			p := places[i]
			id, err := uuid.NewV7()
			if err != nil {
				return nil, err
			}
			findings, proposal, err := evidence(p)
			return []any{volume, numbers[i], id, p.Key, p.Probability, p.Gain, p.Minutes, p.Point, p.Said, findings, proposal}, err
		}))
	if err != nil {
		return nil, err
	}
	return numbers, note(ctx, tx, volume, numbers, "", "made", why)
}

// better puts the higher priority first, and keeps a stable order among equals.
func better(a, b triage.Place) int {
	switch {
	case a.Priority > b.Priority:
		return -1
	case a.Priority < b.Priority:
		return 1
	}
	return 0
}

// evidence is what triage said of a place, as it is stored.
func evidence(p triage.Place) (findings []byte, proposal *json.RawMessage, err error) {
	if p.Findings == nil {
		p.Findings = []triage.Finding{}
	}
	if findings, err = json.Marshal(p.Findings); err != nil || p.Proposal == nil {
		return findings, nil, err
	}
	raw, err := json.Marshal(p.Proposal)
	return findings, (*json.RawMessage)(&raw), err
}
