package stats

// HilbertBits is the grid that Hilbert orders by default: 2^16 steps along each axis.
const HilbertBits = 16

// Hilbert is the place of a cell of a cubic grid on Hilbert's curve: cells next to each other on the curve are neighbours in
// space. The grid has 2^bits steps along each axis, with bits from 1 to 21; coordinates beyond it are taken at its edge. The order
// depends on bits, so keep one for a volume.
//
// Skilling 2004, AIP Conf. Proc. 707:381-387.
func Hilbert(cell [3]uint32, bits int) uint64 {
	x := cell
	for i := range x {
		x[i] = min(x[i], 1<<bits-1)
	}
	for q := uint32(1) << (bits - 1); q > 1; q >>= 1 { // inverse undo: turn each level back
		low := q - 1
		for i := range x {
			if x[i]&q != 0 {
				x[0] ^= low
			} else {
				t := (x[0] ^ x[i]) & low
				x[0] ^= t
				x[i] ^= t
			}
		}
	}
	x[1] ^= x[0]
	x[2] ^= x[1]
	var t uint32
	for q := uint32(1) << (bits - 1); q > 1; q >>= 1 {
		if x[2]&q != 0 {
			t ^= q - 1
		}
	}
	var index uint64
	for b := bits - 1; b >= 0; b-- { // interleave, x first
		for i := range x {
			index = index<<1 | uint64((x[i]^t)>>b&1)
		}
	}
	return index
}

// HilbertAt is the place of a point, nm, in a box with one scale for all axes, so that distances keep their proportions.
func HilbertAt(p, lo, hi [3]float64) uint64 {
	side := max(hi[0]-lo[0], hi[1]-lo[1], hi[2]-lo[2])
	if side <= 0 {
		return 0
	}
	var cell [3]uint32
	for i := range cell {
		share := min(1, max(0, (p[i]-lo[i])/side))
		cell[i] = uint32(min(1<<HilbertBits-1, share*(1<<HilbertBits)))
	}
	return Hilbert(cell, HilbertBits)
}
