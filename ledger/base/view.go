package base

import (
	"cmp"
	"context"
	"fmt"
	"slices"
	"sort"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/pg"
)

// chosen is a set of ranges and the way from an ordinal to its place among them.
type chosen struct {
	ranges []Range
	before []int // how many ordinals stand before each range
	n      int
	last   int // range of the last look-up: the next is mostly there too
}

func choose(ranges []Range, most int64) (*chosen, error) {
	c := &chosen{ranges: ranges, before: make([]int, len(ranges))}
	end := uint32(0)
	for i, r := range ranges {
		if r.Lo >= r.Hi || r.Lo < end || int64(r.Hi) > most {
			return nil, fmt.Errorf("base: [%d, %d) is not a range of ordinals here", r.Lo, r.Hi)
		}
		c.before[i] = c.n
		c.n += r.Len()
		end = r.Hi
	}
	return c, nil
}

// place is where an ordinal stands, -1 when it is not chosen. O(1) near the last one, else O(log ranges).
func (c *chosen) place(g uint32) int {
	if r := c.ranges[c.last]; g < r.Lo || g >= r.Hi {
		i := sort.Search(len(c.ranges), func(i int) bool { return c.ranges[i].Hi > g })
		if i == len(c.ranges) || g < c.ranges[i].Lo {
			return -1
		}
		c.last = i
	}
	return c.before[c.last] + int(g-c.ranges[c.last].Lo)
}

// blocks lists the blocks that hold chosen ordinals.
func (c *chosen) blocks() []int {
	var out []int
	for _, r := range c.ranges {
		first := int(r.Lo / blockSize)
		if n := len(out); n > 0 && out[n-1] == first {
			first++
		}
		for k := first; k <= int((r.Hi-1)/blockSize); k++ {
			out = append(out, k)
		}
	}
	return out
}

// within calls fn with the place among the chosen and the place in the block of each chosen ordinal of a block.
func (c *chosen) within(lo uint32, n int, fn func(i, k int)) {
	first := sort.Search(len(c.ranges), func(i int) bool { return c.ranges[i].Hi > lo })
	for i := first; i < len(c.ranges) && c.ranges[i].Lo < lo+uint32(n); i++ {
		r := c.ranges[i]
		for g := max(r.Lo, lo); g < min(r.Hi, lo+uint32(n)); g++ {
			fn(c.before[i]+int(g-r.Lo), int(g-lo))
		}
	}
}

// View loads supervoxels whole. Time and memory are proportional to the blocks they lie in and to what they hold:
// tens of ms for 100,000 once the blocks are cached.
func (b *Base) View(ctx context.Context, db pg.DB, ranges []Range) (*View, error) {
	c, err := choose(ranges, b.info.Supervoxels)
	if err != nil {
		return nil, err
	}
	v := &View{
		VoxelNM: b.info.VoxelNM, Bounds: b.info.Bounds, Seams: b.info.Seams, Gaps: b.info.Gaps,
		Ordinals: make([]uint32, 0, c.n), IDs: make([]ID, 0, c.n), Points: make([]Point, c.n),
		Voxels: make([]int64, c.n), Radius: make([]float64, c.n), Contacts: make([]Contact, 0, 2*c.n),
	}
	for _, r := range ranges {
		for g := r.Lo; g < r.Hi; g++ {
			v.Ordinals, v.IDs = append(v.Ordinals, g), append(v.IDs, ID(b.ids[g]))
		}
	}
	if c.n == 0 {
		return v, nil
	}
	err = b.load(ctx, db, c.blocks(), []string{sectionGeometry, sectionAccepted, sectionRejected}, func(blk *block) error {
		v.takeGeometry(c, blk)
		v.takeTouches(c, blk, blk.accepted, true)
		v.takeTouches(c, blk, blk.rejected, false)
		return nil
	})
	if err != nil {
		return nil, err
	}
	slices.SortFunc(v.Outside, func(x, y Outside) int { return cmp.Or(cmp.Compare(x.At, y.At), cmp.Compare(x.Other, y.Other)) })
	for i := range v.Outside {
		v.Outside[i].OtherID = ID(b.ids[v.Outside[i].Other])
	}
	// Most segments are fragments that hold neither, and their table says so: no need to ask the database.
	if b.some(ranges, func(s *segmentRecord) bool { return s.in > 0 || s.out > 0 }) {
		if err := b.viewSynapses(ctx, db, c, v); err != nil {
			return nil, err
		}
	}
	if b.some(ranges, func(s *segmentRecord) bool { return s.nuclei > 0 }) {
		if err := b.viewNuclei(ctx, db, c, v); err != nil {
			return nil, err
		}
	}
	return v, nil
}

// some says whether a base segment that the ranges touch is so. O(ranges + base segments touched).
func (b *Base) some(ranges []Range, is func(*segmentRecord) bool) bool {
	for _, r := range ranges {
		for n := b.SegmentNumber(r.Lo); n < len(b.segments) && b.segments[n].lo < r.Hi; n++ {
			if is(&b.segments[n]) {
				return true
			}
		}
	}
	return false
}

func (v *View) takeGeometry(c *chosen, blk *block) {
	g := blk.geometry
	c.within(blk.lo, g.len(), func(i, k int) {
		v.Points[i], v.Voxels[i] = g.point(k), g.voxels[k]
		if r := g.radius[k]; r > 0 {
			v.Radius[i] = float64(r - 1)
		} else {
			v.Radius[i] = ballRadius(g.voxels[k], v.VoxelNM)
		}
	})
}

// takeTouches sorts a block's contacts into those with both ends chosen and those with one. A contact that leaves the
// block stands in two blocks: with both ends chosen, the block of its lower end brings it.
func (v *View) takeTouches(c *chosen, blk *block, t *touches, accepted bool) {
	for k := range t.len() {
		if t.start[k] == t.start[k+1] {
			continue
		}
		g := blk.lo + uint32(k)
		at := c.place(g)
		for j := t.start[k]; j < t.start[k+1]; j++ {
			other := t.other[j]
			there := c.place(other)
			assumed := t.affinity[j] == assumedCode
			switch {
			case at >= 0 && there >= 0:
				if accepted && g < other {
					v.Contacts = append(v.Contacts, Contact{A: int32(at), B: int32(there), Affinity: affinityOf(t.affinity[j]), Area: t.areaOf(j), Assumed: assumed})
				}
			case at >= 0:
				v.Outside = append(v.Outside, Outside{At: int32(at), Other: other, Affinity: affinityOf(t.affinity[j]), Area: t.areaOf(j), Accepted: accepted, Assumed: assumed})
			case there >= 0 && other/blockSize == g/blockSize:
				v.Outside = append(v.Outside, Outside{At: int32(there), Other: g, Affinity: affinityOf(t.affinity[j]), Area: t.areaOf(j), Accepted: accepted, Assumed: assumed})
			}
		}
	}
}

// bounds gives ranges as two arrays for a query.
func (c *chosen) bounds() (lo, hi []int64) {
	for _, r := range c.ranges {
		lo, hi = append(lo, int64(r.Lo)), append(hi, int64(r.Hi))
	}
	return lo, hi
}

func (b *Base) viewSynapses(ctx context.Context, db pg.DB, c *chosen, v *View) error {
	lo, hi := c.bounds()
	rows, err := db.Query(ctx, `
		select true, s.pre, s.post, s.synapse_id, s.x_nm::float8, s.y_nm::float8, s.z_nm::float8, s.confidence, coalesce(s.transmitter, '')
		  from unnest($2::bigint[], $3::bigint[]) r (lo, hi)
		  join base_synapse s on s.volume_id = $1 and s.pre >= r.lo and s.pre < r.hi
		union all
		select false, s.post, s.pre, s.synapse_id, s.x_nm::float8, s.y_nm::float8, s.z_nm::float8, s.confidence, coalesce(s.transmitter, '')
		  from unnest($2::bigint[], $3::bigint[]) r (lo, hi)
		  join base_synapse s on s.volume_id = $1 and s.post >= r.lo and s.post < r.hi`, b.info.VolumeID, lo, hi)
	if err != nil {
		return err
	}
	var s Synapse
	var here int64
	_, err = pgx.ForEachRow(rows, []any{&s.Out, &here, &s.Other, &s.ID, &s.Point[0], &s.Point[1], &s.Point[2], &s.Confidence, &s.Transmitter}, func() error {
		s.At = int32(c.place(uint32(here)))
		v.Synapses = append(v.Synapses, s)
		return nil
	})
	slices.SortFunc(v.Synapses, func(x, y Synapse) int {
		return cmp.Or(cmp.Compare(x.At, y.At), compareBools(x.Out, y.Out), cmp.Compare(x.ID, y.ID))
	})
	return err
}

func compareBools(x, y bool) int {
	switch {
	case x == y:
		return 0
	case y:
		return -1
	}
	return 1
}

func (b *Base) viewNuclei(ctx context.Context, db pg.DB, c *chosen, v *View) error {
	lo, hi := c.bounds()
	rows, err := db.Query(ctx, `
		select n.supervoxel, n.nucleus_id, n.x_nm::float8, n.y_nm::float8, n.z_nm::float8, n.volume_nm3
		  from unnest($2::bigint[], $3::bigint[]) r (lo, hi)
		  join base_nucleus n on n.volume_id = $1 and n.supervoxel >= r.lo and n.supervoxel < r.hi`, b.info.VolumeID, lo, hi)
	if err != nil {
		return err
	}
	var n Nucleus
	var here int64
	_, err = pgx.ForEachRow(rows, []any{&here, &n.ID, &n.Point[0], &n.Point[1], &n.Point[2], &n.VolumeNM3}, func() error {
		n.At = int32(c.place(uint32(here)))
		v.Nuclei = append(v.Nuclei, n)
		return nil
	})
	slices.SortFunc(v.Nuclei, func(x, y Nucleus) int { return cmp.Or(cmp.Compare(x.At, y.At), cmp.Compare(x.ID, y.ID)) })
	return err
}
