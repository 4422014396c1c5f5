package ledger

import (
	"context"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"
)

// descend finds what became of an id: its current descendants, and the entries on the way, oldest first. A current
// id becomes itself. One recursive query over the segments that entries touched.
func (v *Volume) descend(ctx context.Context, id ID) (became []ID, between []Change, err error) {
	rows, err := v.pool.Query(ctx, `
		with recursive heir (segment_id, retired) as (
		     select segment_id, retired from segment where volume_id = $1 and segment_id = $2
		     union
		     select s.segment_id, s.retired
		       from heir h
		       join entry e on e.volume_id = $1 and e.position = h.retired
		       join segment s on s.volume_id = $1 and s.segment_id = any (e.after))
		select h.segment_id, coalesce(h.retired, 0), coalesce(e.kind, ''), coalesce(e.person, ''), e.posted_at, e.before, e.after
		  from heir h left join entry e on e.volume_id = $1 and e.position = h.retired
		 order by h.retired nulls last, h.segment_id`, v.info.VolumeID, id)
	if err != nil {
		return nil, nil, err
	}
	var c Change
	var heir ID
	var at *time.Time
	last := int64(-1)
	_, err = pgx.ForEachRow(rows, []any{&heir, &c.Position, &c.Kind, &c.Person, &at, &c.Before, &c.After}, func() error {
		switch {
		case c.Position == 0:
			became = append(became, heir)
		case c.Position != last:
			c.At, last = at.UTC().Format(time.RFC3339Nano), c.Position
			between = append(between, c)
		}
		return nil
	})
	if err == nil && len(became)+len(between) == 0 {
		became = []ID{id} // a delivered segment that nobody has touched
	}
	return became, between, err
}

// Became lists the current descendants of an id that is or was a segment: itself while it is current.
func (v *Volume) Became(ctx context.Context, id ID) ([]ID, error) {
	if _, err := v.Segment(ctx, id); err != nil {
		return nil, err
	}
	became, _, err := v.descend(ctx, id)
	return became, err
}

// SegmentEntries is the history of a segment: every entry that its content came through, and the one that retired
// it, oldest first.
func (v *Volume) SegmentEntries(ctx context.Context, id ID) ([]Entry, error) {
	seg, err := v.Segment(ctx, id)
	if err != nil {
		return nil, err
	}
	rows, err := v.pool.Query(ctx, `
		with recursive forebear (segment_id, born) as (
		     select segment_id, born from segment where volume_id = $1 and segment_id = $2
		     union
		     select s.segment_id, s.born
		       from forebear f
		       join entry e on e.volume_id = $1 and e.position = f.born
		       join segment s on s.volume_id = $1 and s.segment_id = any (e.before))
		select distinct born from forebear where born > 0 order by born`, v.info.VolumeID, id)
	if err != nil {
		return nil, err
	}
	positions, err := pgx.CollectRows(rows, pgx.RowTo[int64])
	if err != nil {
		return nil, err
	}
	if seg.Retired > 0 {
		positions = append(positions, seg.Retired)
	}
	return v.at(ctx, positions)
}

// AnchorEntries is the history of whatever segment held a supervoxel: the entries that changed it, oldest first.
// That is how a neuron is followed while its segment's ids come and go.
func (v *Volume) AnchorEntries(ctx context.Context, anchor ID) ([]Entry, error) {
	ord, err := v.ordinals([]ID{anchor})
	if err != nil {
		return nil, err
	}
	g := int64(ord[0])
	home := int64(v.base.SegmentNumber(ord[0]))
	// The groups the supervoxel was in, each over its span; at home where no row says otherwise. An entry that moved
	// it to another group made that group's segment too, so every change shows as a segment born within a span.
	rows, err := v.pool.Query(ctx, `
		with stay as (
		     select grp, from_position, to_position from piece p
		      where int8range((p.volume_id::bigint << 32) + p.lo, (p.volume_id::bigint << 32) + p.hi) @> (($1::bigint << 32) + $2::bigint))
		select s.born from stay join segment s on s.volume_id = $1 and s.grp = stay.grp
		    and s.born >= stay.from_position and (stay.to_position is null or s.born < stay.to_position)
		union
		select s.born from segment s
		 where s.volume_id = $1::int and s.grp = $3 and s.born > 0
		   and not exists (select from stay where s.born >= from_position and (to_position is null or s.born < to_position))
		order by 1`, v.info.VolumeID, g, home)
	if err != nil {
		return nil, err
	}
	positions, err := pgx.CollectRows(rows, pgx.RowTo[int64])
	if err != nil {
		return nil, err
	}
	return v.at(ctx, positions)
}

// at fetches the entries at some positions, oldest first.
func (v *Volume) at(ctx context.Context, positions []int64) ([]Entry, error) {
	if len(positions) == 0 {
		return nil, nil
	}
	slices.Sort(positions)
	return v.Entries(ctx, Filter{Positions: slices.Compact(positions), Limit: len(positions)})
}
