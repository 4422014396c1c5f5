package base

import (
	"cmp"
	"context"
	"math"
	"slices"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// Nearest finds the supervoxel whose centre is nearest to a point, among ranges or, when they are nil, in the whole
// volume; of equally near ones the lowest ordinal. Blocks are looked at in order of the distance of their bounding
// boxes until none can hold a nearer one: O(supervoxels) at worst, a few blocks as a rule.
func (b *Base) Nearest(ctx context.Context, db pg.DB, ranges []Range, p Point) (g uint32, distance float64, err error) {
	if ranges == nil {
		ranges = []Range{{0, uint32(b.info.Supervoxels)}}
	}
	c, err := choose(ranges, b.info.Supervoxels)
	if err != nil {
		return 0, 0, err
	}
	if c.n == 0 {
		return 0, 0, fault.New(fault.Invalid, "nearest-nothing", "there is no supervoxel to be near to")
	}
	numbers := c.blocks()
	away := make(map[int]float64, len(numbers))
	for _, n := range numbers {
		away[n] = b.boxes[n].distance2(p)
	}
	slices.SortFunc(numbers, func(x, y int) int { return cmp.Or(cmp.Compare(away[x], away[y]), cmp.Compare(x, y)) })
	best := math.Inf(1)
	for _, n := range numbers {
		if away[n] > best {
			break
		}
		err := b.load(ctx, db, []int{n}, []string{sectionGeometry}, func(blk *block) error {
			c.within(blk.lo, blk.geometry.len(), func(_, k int) {
				at := blk.lo + uint32(k)
				if d := p.distance2(blk.geometry.point(k)); d < best || d == best && at < g {
					best, g = d, at
				}
			})
			return nil
		})
		if err != nil {
			return 0, 0, err
		}
	}
	return g, math.Sqrt(best), nil
}
