package ledger

import (
	"context"
	"errors"
	"fmt"
	"strings"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// Filter chooses entries. Zero fields choose all.
type Filter struct {
	Person     string
	Kind       string
	Task       *uuid.UUID
	Positions  []int64 // exactly these
	After      int64   // positions above it
	Before     int64   // positions below it, when > 0
	Limit      int     // 0: 1000
	Descending bool    // newest first
}

// Entries lists entries by position.
func (v *Volume) Entries(ctx context.Context, f Filter) ([]Entry, error) {
	where, args := []string{"e.volume_id = $1"}, []any{v.info.VolumeID}
	add := func(cond string, arg any) {
		args = append(args, arg)
		where = append(where, fmt.Sprintf(cond, len(args)))
	}
	if f.Person != "" {
		add("person = $%d", f.Person)
	}
	if f.Kind != "" {
		add("kind = $%d", f.Kind)
	}
	if f.Task != nil {
		add("task_id = $%d", *f.Task)
	}
	if f.Positions != nil {
		add("position = any($%d)", f.Positions)
	}
	if f.After > 0 {
		add("position > $%d", f.After)
	}
	if f.Before > 0 {
		add("position < $%d", f.Before)
	}
	order := "position"
	if f.Descending {
		order = "position desc"
	}
	if f.Limit <= 0 {
		f.Limit = 1000
	}
	args = append(args, f.Limit)
	return queryEntries(ctx, v.pool, fmt.Sprintf("%s where %s order by %s limit $%d",
		entryColumns, strings.Join(where, " and "), order, len(args)), args...)
}

// Entry is the entry at a position; fault.NotFound when there is none.
func (v *Volume) Entry(ctx context.Context, position int64) (Entry, error) {
	es, err := v.Entries(ctx, Filter{Positions: []int64{position}})
	if err != nil {
		return Entry{}, err
	}
	if len(es) == 0 {
		return Entry{}, fault.Newf(fault.NotFound, "position-unknown", "volume %s has no entry at position %d", v.info.Name, position).
			WithNext("list the entries to see which positions there are")
	}
	return es[0], nil
}

func (v *Volume) entryByID(ctx context.Context, id uuid.UUID) (Entry, error) {
	es, err := queryEntries(ctx, v.pool, entryColumns+` where entry_id = $1`, id)
	if err != nil {
		return Entry{}, err
	}
	if len(es) == 0 {
		return Entry{}, fault.Newf(fault.NotFound, "entry-unknown", "there is no entry %s", id)
	}
	return es[0], nil
}

const entryColumns = `
	select v.name, position, entry_id, kind, person, coalesce(agent, ''), posted_at, task_id, reason, coalesce(reverses, 0),
	       before, after, joined_contacts, joined_links, cut_contacts, cut_links, coalesce(cost, 0), content, leaf_hash
	  from entry e join volume v using (volume_id)`

func queryEntries(ctx context.Context, db pg.DB, sql string, args ...any) ([]Entry, error) {
	rows, err := db.Query(ctx, sql, args...)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, scanEntry)
}

func scanEntry(row pgx.CollectableRow) (Entry, error) {
	var e Entry
	var jc, jl, cc, cl []ID
	var leaf []byte
	err := row.Scan(&e.Volume, &e.Position, &e.ID, &e.Kind, &e.Person, &e.Agent, &e.At, &e.Task, &e.Reason, &e.Reverses,
		&e.Before, &e.After, &jc, &jl, &cc, &cl, &e.Cost, &e.Content, &leaf)
	if err != nil {
		return e, err
	}
	if len(leaf) != len(e.Leaf) {
		return e, errors.New("leaf hash has another length")
	}
	copy(e.Leaf[:], leaf)
	e.Joined = Edges{Contacts: unflat(jc), Links: unflat(jl)}
	e.Cut = Edges{Contacts: unflat(cc), Links: unflat(cl)}
	e.At = e.At.UTC()
	e.Seeds = e.seedsFromContent()
	return e, nil
}
