package tasks

import (
	"context"
	"encoding/json"
	"maps"
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
	numbers := make([]int64, len(places))
	for i := range places {
		numbers[i] = last + 1 + int64(i)
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
	if err := nameKeys(ctx, tx, volume, numbers, places); err != nil {
		return nil, err
	}
	return numbers, note(ctx, tx, volume, numbers, "", "made", why)
}

// nameKeys writes down which task each finding's place belongs to now.
func nameKeys(ctx context.Context, tx pgx.Tx, volume int32, numbers []int64, places []triage.Place) error {
	owner := make(map[string]int64)
	for i, p := range slices.Backward(places) { // so that the better place keeps a key that two have
		for _, key := range keysOf(p) {
			owner[key] = numbers[i]
		}
	}
	keys := slices.Sorted(maps.Keys(owner)) // in the order of the index
	owners := make([]int64, len(keys))
	for i, key := range keys {
		owners[i] = owner[key]
	}
	_, err := tx.Exec(ctx, `
		insert into task_key (volume_id, key, number) select $1, * from unnest($2::text[], $3::bigint[])
		on conflict (volume_id, key) do update set number = excluded.number`, volume, keys, owners)
	return err
}

// keysOf are the names by which a place is known again: its own, and those of its findings.
func keysOf(p triage.Place) []string {
	keys := []string{p.Key}
	for _, f := range p.Findings {
		if f.Key != "" && !slices.Contains(keys, f.Key) {
			keys = append(keys, f.Key)
		}
	}
	return keys
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
