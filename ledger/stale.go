package ledger

import (
	"cmp"
	"context"
	"errors"
	"slices"

	"fettle.example/fettle/internal/fault"
)

// staleError says that ids a caller named are retired. It is made where no database is at hand; explain turns it
// into the answer that people get.
type staleError struct{ saw []ID }

func (e *staleError) Error() string { return "retired: " + list(e.saw) }

// Change is an entry in brief, as an answer to a stale request lists it.
type Change struct {
	Position int64  `json:"position,string"`
	Kind     string `json:"kind"`
	Person   string `json:"person"`
	At       string `json:"at"`
	Before   []ID   `json:"before"`
	After    []ID   `json:"after"`
}

// explain turns a staleError into a fault.Retired with the current ids ("current") and the entries that came
// between ("entries", oldest first). Other errors pass as they are.
func (v *Volume) explain(ctx context.Context, err error) error {
	var stale *staleError
	if !errors.As(err, &stale) {
		return err
	}
	var current []ID
	var changes []Change
	seen := make(map[int64]bool)
	for _, id := range stale.saw {
		if _, err := v.Segment(ctx, id); err != nil {
			return err // it never was a segment
		}
		became, between, lerr := v.descend(ctx, id)
		if lerr != nil {
			return errors.Join(err, lerr)
		}
		current = append(current, became...)
		for _, c := range between {
			if !seen[c.Position] {
				seen[c.Position] = true
				changes = append(changes, c)
			}
		}
	}
	slices.SortFunc(changes, func(a, b Change) int { return cmp.Compare(a.Position, b.Position) })
	f := fault.Newf(fault.Retired, "segment-retired", "the segments you saw (%s) have changed since", list(stale.saw)).
		WithNext("look at the current segments and the entries between, then ask again").
		WithData("current", unique(current)).WithData("entries", changes)
	if len(changes) > 0 {
		last := changes[len(changes)-1]
		f.Message += ", last by " + last.Person + " at position " + itoa(last.Position)
	}
	return f
}
