package ledger

import (
	"context"
	"errors"
	"slices"
	"strconv"
	"time"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger/base"
)

// At names the moment a question is about: a position, or a time, which means the last position posted at or
// before it. The zero At is now.
type At struct {
	Position *int64
	Time     *time.Time
}

// AtPosition is the At of a position.
func AtPosition(p int64) At { return At{Position: &p} }

// Resolve turns an At into a position; now is the head. A position beyond the head is fault.NotFound.
func (v *Volume) Resolve(ctx context.Context, at At) (int64, error) {
	head, err := v.Head(ctx)
	if err != nil {
		return 0, err
	}
	switch {
	case at.Position != nil:
		if *at.Position < 0 || *at.Position > head {
			return 0, fault.Newf(fault.NotFound, "position-unknown", "volume %s has positions 0 to %d, not %d", v.info.Name, head, *at.Position).
				WithField("at").WithNext("name one of those, or a time")
		}
		return *at.Position, nil
	case at.Time != nil:
		var p int64
		err := v.pool.QueryRow(ctx, `
			select coalesce(max(position), 0) from entry where volume_id = $1 and posted_at <= $2`,
			v.info.VolumeID, *at.Time).Scan(&p)
		return p, err
	}
	return head, nil
}

func (a At) now() bool { return a.Position == nil && a.Time == nil }

// SegmentsOf tells each supervoxel's segment, in the order asked. Unknown supervoxels are fault.NotFound.
// Now: O(log) a supervoxel in memory. At a past position: one query for all of them, or for many the whole of what was in force
// then, which is remembered.
func (v *Volume) SegmentsOf(ctx context.Context, ids []ID, at At) ([]ID, error) {
	ord, err := v.ordinals(ids)
	if err != nil {
		return nil, err
	}
	if !at.now() {
		p, err := v.Resolve(ctx, at)
		if err != nil {
			return nil, err
		}
		return v.segmentsThen(ctx, ord, p)
	}
	if err := v.fresh(ctx); err != nil {
		return nil, err
	}
	defer v.mu.RUnlock()
	out := make([]ID, len(ord))
	for i, g := range ord {
		out[i] = v.state.idOf(v.state.groupOf(g))
	}
	return out, nil
}

// segmentsThen answers for a past position: for a few supervoxels from the tables, by the piece that covered the ordinal, or its home group;
// then the segment that group was, or the delivered one when no entry had touched it.
func (v *Volume) segmentsThen(ctx context.Context, ord []uint32, p int64) ([]ID, error) {
	if len(ord) >= pastFrom {
		then, err := v.pastAt(ctx, p)
		if err != nil {
			return nil, err
		}
		out := make([]ID, len(ord))
		for i, g := range ord {
			out[i] = v.segmentIn(then, g)
		}
		return out, nil
	}
	at, home := make([]int64, len(ord)), make([]int64, len(ord))
	out := make([]ID, len(ord))
	for i, g := range ord {
		n := v.base.SegmentNumber(g)
		at[i], home[i] = int64(g), int64(n)
		out[i] = v.base.SegmentID(n)
	}
	rows, err := v.pool.Query(ctx, `
		select a.i, s.segment_id
		  from unnest($2::bigint[], $3::bigint[]) with ordinality a (g, home, i)
		  left join lateral (
		       select p.grp from piece p
		        where int8range((p.volume_id::bigint << 32) + p.lo, (p.volume_id::bigint << 32) + p.hi) @> (($1::bigint << 32) + a.g)
		          and int8range(p.from_position, p.to_position) @> $4::bigint) p on true
		  join lateral (
		       select s.segment_id from segment s
		        where s.volume_id = $1::int and s.grp = coalesce(p.grp, a.home)
		          and s.born <= $4 and (s.retired is null or s.retired > $4)
		        order by s.born desc limit 1) s on true`,
		v.info.VolumeID, at, home, p)
	if err != nil {
		return nil, err
	}
	var i int64
	var id ID
	_, err = pgx.ForEachRow(rows, []any{&i, &id}, func() error { out[i-1] = id; return nil })
	return out, err
}

// Segment tells what is known of an id that is or ever was a segment; fault.NotFound otherwise.
func (v *Volume) Segment(ctx context.Context, id ID) (Segment, error) {
	if err := v.fresh(ctx); err != nil {
		return Segment{}, err
	}
	seg, ok := v.state.lookup(id)
	v.mu.RUnlock()
	if ok {
		return seg, nil
	}
	seg, err := scanSegment(v.pool.QueryRow(ctx, segmentColumns+` where volume_id = $1 and segment_id = $2`, v.info.VolumeID, id))
	if errors.Is(err, pgx.ErrNoRows) {
		f := fault.Newf(fault.NotFound, "segment-unknown", "volume %s never had a segment %s", v.info.Name, id)
		if _, is := v.base.Ordinal(id); is {
			return Segment{}, f.WithNext("this is a supervoxel's id: ask for the segment of the supervoxel")
		}
		return Segment{}, f.WithNext("check the id; segment ids come from answers about supervoxels, entries and tasks")
	}
	return seg, err
}

const segmentColumns = `select segment_id, grp, born, coalesce(retired, 0), supervoxels, voxels, synapses_in, synapses_out, nuclei, bounds_nm from segment`

func scanSegment(row pgx.Row) (Segment, error) {
	var s Segment
	var bounds []int64
	err := row.Scan(&s.ID, &s.group, &s.Born, &s.Retired, &s.Supervoxels, &s.Voxels, &s.SynapsesIn, &s.SynapsesOut, &s.Nuclei, &bounds)
	if err != nil {
		return s, err
	}
	for i := range 3 {
		s.Min[i], s.Max[i] = float64(bounds[i]), float64(bounds[i+3])
	}
	return s, nil
}

// Members lists supervoxels of a current segment, at most limit of them, after a supervoxel that an earlier call
// ended with (0 to begin). The order is the volume's own and stays as it is.
func (v *Volume) Members(ctx context.Context, id, after ID, limit int) ([]ID, error) {
	if err := v.fresh(ctx); err != nil {
		return nil, err
	}
	seg, ok := v.state.lookup(id)
	var ranges []base.Range
	if ok {
		ranges = v.state.ranges(seg.group)
	}
	v.mu.RUnlock()
	if !ok {
		return nil, v.explain(ctx, v.missing(ctx, id))
	}
	var from uint32
	if after != 0 {
		g, err := v.ordinals([]ID{after})
		if err != nil {
			return nil, err
		}
		from = g[0] + 1
	}
	var ord []uint32
	for _, r := range ranges {
		for g := max(r.Lo, from); g < r.Hi && len(ord) < limit; g++ {
			ord = append(ord, g)
		}
	}
	return v.base.SupervoxelIDs(ctx, v.pool, ord)
}

// CurrentSegments calls yield with every current segment, in no stated order, at one position, which it returns.
func (v *Volume) CurrentSegments(ctx context.Context, yield func(Segment) error) (int64, error) {
	if err := v.fresh(ctx); err != nil {
		return 0, err
	}
	all := make([]Segment, 0, v.base.SegmentCount())
	for n := range v.base.SegmentCount() {
		b := v.base.Segment(n)
		if _, gone := v.state.gone[b.ID]; !gone {
			all = append(all, v.state.segmentOf(int64(n)))
		}
	}
	for _, g := range v.state.byID {
		all = append(all, v.state.current[g])
	}
	position := v.state.position
	v.mu.RUnlock()
	for _, seg := range all {
		if err := yield(seg); err != nil {
			return position, err
		}
	}
	return position, nil
}

func unique(ids []ID) []ID {
	slices.Sort(ids)
	return slices.Compact(ids)
}

func itoa(n int64) string { return strconv.FormatInt(n, 10) }
