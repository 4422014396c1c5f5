package base

import (
	"cmp"
	"fmt"
	"math"
	"slices"
)

// supervoxels is the supervoxel table in memory, by rank, the place among all by id: some 40 bytes each.
type supervoxels struct {
	ids      []uint64
	segment  []uint32 // index into segments
	voxels   []int64
	at       [][3]int32 // whole nm
	radius   []uint32   // whole nm + 1; 0 when not delivered
	segments []uint64   // ids of base segments, ascending
	index    *idIndex

	gaps bool // some row could not be read, so that an unknown id elsewhere proves nothing
}

func (s *supervoxels) len() int { return len(s.ids) }

func (s *supervoxels) distance2(a, b uint32) uint64 {
	var sum uint64
	for i := range 3 {
		d := int64(s.at[a][i]) - int64(s.at[b][i])
		sum += uint64(d * d)
	}
	return sum
}

// most supervoxels of a volume: ordinals are 32 bits wide, and one value stays free.
const mostSupervoxels = math.MaxUint32 - 1

const (
	reasonZero  = "is 0, which means background and names nothing"
	reasonFar   = "is beyond 1 m"
	reasonTwice = "is there twice"
)

// readSupervoxels reads and checks the whole table.
func (im *importer) readSupervoxels() (*supervoxels, error) {
	s := &supervoxels{}
	var segment []uint64 // by row, as the others until they are ranked
	var lines []uint32
	outside := outside{bounds: im.info.Bounds}
	all := int64(0) // voxels
	err := im.each(supervoxelTable, func(r *row) error {
		id, seg, voxels := r.cells[0].id, r.cells[1].id, r.cells[2].count
		if r.bad() {
			s.gaps = true
			return nil
		}
		bad := func(c int, value any, reason string) {
			im.problems.add(supervoxelTable.name, r.line, supervoxelTable.columns[c].name, fmt.Sprint(value), reason)
		}
		if id == 0 {
			bad(0, id, reasonZero)
		}
		if seg == 0 {
			bad(1, seg, reasonZero)
		}
		switch {
		case voxels < 1:
			bad(2, voxels, "is not above 0")
		case voxels > math.MaxInt64-all:
			bad(2, voxels, "brings the voxels of the volume to 2^63 and more")
		default:
			all += voxels
		}
		at := im.point(supervoxelTable, r, 3)
		outside.see(at, r.line)
		radius := uint32(0)
		if c := r.cells[6]; c.given {
			if c.number < 0 || c.number > largestNM {
				bad(6, c.number, "is not a radius in nm")
			} else {
				radius = uint32(math.Round(c.number)) + 1
			}
		}
		if s.len() == mostSupervoxels {
			return fmt.Errorf("base: more than %d supervoxels", uint32(mostSupervoxels))
		}
		s.ids, segment, s.voxels = append(s.ids, uint64(id)), append(segment, uint64(seg)), append(s.voxels, voxels)
		s.at, s.radius, lines = append(s.at, at), append(s.radius, radius), append(lines, uint32(r.line))
		return nil
	})
	if err != nil {
		return nil, err
	}
	s.gaps = s.gaps || s.len() == 0
	im.judgeOutside(s.len(), outside)
	im.rankSupervoxels(s, segment, lines)
	return s, nil
}

// outside counts points beyond the volume's bounds.
type outside struct {
	bounds Bounds // zero when volume.json has none that do
	n      int
	first  int64 // line
}

func (o *outside) see(p [3]int32, line int64) {
	if o.bounds == (Bounds{}) || o.bounds.holds(p) {
		return
	}
	if o.n++; o.n == 1 {
		o.first = line
	}
}

// warnOutside: some points at the rim may stick out.
func (im *importer) warnOutside(t *table, all int, o outside) {
	if o.n > 0 {
		im.warnf("%s has %s outside the volume's bounds, of %d, the first on line %d", t.name, plural(o.n, "point", "points"), all, o.first)
	}
}

// judgeOutside: when most supervoxels lie outside, the table and volume.json are not of one volume.
func (im *importer) judgeOutside(all int, o outside) {
	if o.n <= all/2 {
		im.warnOutside(supervoxelTable, all, o)
		return
	}
	im.problems.add(supervoxelTable.name, o.first, "", "", fmt.Sprintf(
		"%d of %d points lie outside bounds_nm, here the first: are these voxels instead of nm, or another volume's?", o.n, all))
}

// rankSupervoxels sorts by id and finds duplicates.
func (im *importer) rankSupervoxels(s *supervoxels, segment []uint64, lines []uint32) {
	order := make([]uint32, s.len())
	for i := range order {
		order[i] = uint32(i)
	}
	slices.SortFunc(order, func(a, b uint32) int { return cmp.Or(cmp.Compare(s.ids[a], s.ids[b]), cmp.Compare(a, b)) })
	s.ids, s.voxels, s.at, s.radius = permuted(s.ids, order), permuted(s.voxels, order), permuted(s.at, order), permuted(s.radius, order)
	segment, lines = permuted(segment, order), permuted(lines, order)
	for i := 1; i < s.len(); i++ {
		if s.ids[i] == s.ids[i-1] {
			im.problems.add(supervoxelTable.name, int64(lines[i]), "supervoxel_id", ID(s.ids[i]).String(),
				fmt.Sprintf("%s, first on line %d", reasonTwice, lines[i-1]))
		}
	}
	s.segments = slices.Clone(segment)
	slices.Sort(s.segments)
	s.segments = slices.Compact(s.segments)
	s.segment = make([]uint32, s.len())
	for i, id := range segment {
		n, _ := slices.BinarySearch(s.segments, id)
		s.segment[i] = uint32(n)
	}
	s.index = newIDIndex(s.ids)
}

func permuted[T any](in []T, order []uint32) []T {
	out := make([]T, len(order))
	for i, k := range order {
		out[i] = in[k]
	}
	return out
}

// holds says whether a point lies in the box, rims included.
func (b Bounds) holds(p [3]int32) bool {
	for i, v := range p {
		if float64(v) < b.Min[i]-0.5 || float64(v) > b.Max[i]+0.5 { // points are rounded
			return false
		}
	}
	return true
}

// point reads three cells as whole nm.
func (im *importer) point(t *table, r *row, c int) (p [3]int32) {
	for i := range p {
		v := r.cells[c+i].number
		if math.Abs(v) > largestNM {
			im.problems.add(t.name, r.line, t.columns[c+i].name, fmt.Sprint(v), reasonFar)
			continue
		}
		p[i] = int32(math.Round(v))
	}
	return p
}
