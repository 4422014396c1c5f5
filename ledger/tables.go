package ledger

import (
	"cmp"
	"context"
	"slices"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/ledger/base"
)

// tables is the cache as the database holds it: what reconcile compares with the truth.
type tables struct {
	pieces   []piece // all that ever were
	segments []Segment
	current  map[int64]Segment // by group
	ended    map[ID]bool       // retired ids
}

func readTables(ctx context.Context, tx pgx.Tx, volume int32) (*tables, error) {
	t := &tables{current: make(map[int64]Segment), ended: make(map[ID]bool)}
	rows, err := tx.Query(ctx, `
		select lo, hi, grp, from_position, coalesce(to_position, 0) from piece where volume_id = $1`, volume)
	if err != nil {
		return nil, err
	}
	var p piece
	if _, err := pgx.ForEachRow(rows, []any{&p.lo, &p.hi, &p.group, &p.from, &p.to}, func() error {
		t.pieces = append(t.pieces, p)
		return nil
	}); err != nil {
		return nil, err
	}
	rows, err = tx.Query(ctx, segmentColumns+` where volume_id = $1`, volume)
	if err != nil {
		return nil, err
	}
	defer rows.Close()
	for rows.Next() {
		s, err := scanSegment(rows)
		if err != nil {
			return nil, err
		}
		t.segments = append(t.segments, s)
		if s.Retired > 0 {
			t.ended[s.ID] = true
		} else {
			t.current[s.group] = s
		}
	}
	return t, rows.Err()
}

// eachCurrent tells the group of every ordinal, in order: that of the open piece which covers it, else its home.
func (t *tables) eachCurrent(b *base.Base, tell func(g uint32, group int64)) {
	open := slices.DeleteFunc(slices.Clone(t.pieces), func(p piece) bool { return p.to > 0 })
	slices.SortFunc(open, func(x, y piece) int { return cmp.Compare(x.lo, y.lo) })
	for n := range b.SegmentCount() {
		home := b.Segment(n)
		for g := home.Lo; g < home.Hi; g++ {
			for len(open) > 0 && open[0].hi <= g {
				open = open[1:]
			}
			if len(open) > 0 && open[0].lo <= g {
				tell(g, open[0].group)
			} else {
				tell(g, int64(n))
			}
		}
	}
}

// checkHistory goes through the positions and counts how many supervoxels each group held: every segment that ever was must
// have held as many as its row says, when it was born and to the end.
func (t *tables) checkHistory(b *base.Base, r *Reconciliation) {
	type event struct {
		position, group, by int64
	}
	var events []event
	for _, p := range t.pieces {
		home, size := int64(b.SegmentNumber(p.lo)), int64(p.hi-p.lo)
		events = append(events, event{p.from, p.group, size}, event{p.from, home, -size})
		if p.to > 0 {
			events = append(events, event{p.to, p.group, -size}, event{p.to, home, size})
		}
	}
	slices.SortFunc(events, func(x, y event) int { return cmp.Compare(x.position, y.position) })
	segments := slices.Clone(t.segments)
	slices.SortFunc(segments, func(x, y Segment) int { return cmp.Compare(x.Born, y.Born) })
	held := make(map[int64]int64) // by group, beyond the size of its base segment
	for _, s := range segments {
		for len(events) > 0 && events[0].position <= s.Born {
			held[events[0].group] += events[0].by
			events = events[1:]
		}
		have := held[s.group]
		if s.group < int64(b.SegmentCount()) {
			home := b.Segment(int(s.group))
			have += int64(home.Hi - home.Lo)
		}
		if have != s.Supervoxels {
			r.differ("segment %s held %d supervoxels at position %d, and its row says %d", s.ID, have, s.Born, s.Supervoxels)
		}
	}
}
