package ledger

import (
	"cmp"
	"context"
	"slices"
	"sort"

	"github.com/jackc/pgx/v5"
)

// past is who was where at one position. The past does not change, so what was read of it once holds.
type past struct {
	position int64
	pieces   []piece      // in force then, by lo; ordinals that none covers were at home
	segments map[int64]ID // of each group that an entry had touched by then
}

const (
	// pastFrom is from how many supervoxels on a question about the past is worth reading all that was in force then.
	pastFrom = 500
	// pastsKept is how many positions are remembered: a piece takes some 60 bytes, so a million of them 60 MB each.
	pastsKept = 3
)

// pastAt returns the state at a position, from memory or from the tables. O(pieces and segments in force then), the first time.
func (v *Volume) pastAt(ctx context.Context, position int64) (*past, error) {
	v.pastMu.Lock()
	defer v.pastMu.Unlock()
	for i, p := range v.pasts {
		if p.position == position {
			v.pasts = append(slices.Delete(v.pasts, i, i+1), p) // the newest stands last
			return p, nil
		}
	}
	p, err := v.readPast(ctx, position)
	if err != nil {
		return nil, err
	}
	if v.pasts = append(v.pasts, p); len(v.pasts) > pastsKept {
		v.pasts = slices.Delete(v.pasts, 0, 1)
	}
	return p, nil
}

// readPast reads what was in force at a position that has been posted, so that no snapshot is needed: later entries only end rows
// later than it.
func (v *Volume) readPast(ctx context.Context, position int64) (*past, error) {
	p := &past{position: position, segments: make(map[int64]ID)}
	rows, err := v.pool.Query(ctx, `
		select lo, hi, grp from piece
		 where volume_id = $1 and from_position <= $2 and (to_position is null or to_position > $2)`, v.info.VolumeID, position)
	if err != nil {
		return nil, err
	}
	var one piece
	if _, err := pgx.ForEachRow(rows, []any{&one.lo, &one.hi, &one.group}, func() error {
		p.pieces = append(p.pieces, one)
		return nil
	}); err != nil {
		return nil, err
	}
	slices.SortFunc(p.pieces, func(a, b piece) int { return cmp.Compare(a.lo, b.lo) })
	rows, err = v.pool.Query(ctx, `
		select grp, segment_id from segment
		 where volume_id = $1 and born <= $2 and (retired is null or retired > $2)`, v.info.VolumeID, position)
	if err != nil {
		return nil, err
	}
	var group int64
	var id ID
	_, err = pgx.ForEachRow(rows, []any{&group, &id}, func() error {
		p.segments[group] = id
		return nil
	})
	return p, err
}

// segmentIn is the segment of an ordinal then. O(log pieces).
func (v *Volume) segmentIn(p *past, g uint32) ID {
	home := v.base.SegmentNumber(g)
	group := int64(home)
	if i := sort.Search(len(p.pieces), func(i int) bool { return p.pieces[i].hi > g }); i < len(p.pieces) && p.pieces[i].lo <= g {
		group = p.pieces[i].group
	}
	if id, ok := p.segments[group]; ok {
		return id
	}
	return v.base.SegmentID(home)
}
