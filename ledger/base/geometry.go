package base

import "math"

// blockSize is how many consecutive ordinals a block holds. Between 2,048 and 4,096 the cost is flat.
const blockSize = 4096

// largestNM bounds coordinates and sizes to 1 m: sums of squared differences then fit 64 bits.
const largestNM = 1e9

// geometry is where the supervoxels of a block are and how large they are, by place in the block.
type geometry struct {
	at     [3][]int32 // nm
	voxels []int64
	radius []uint32 // nm + 1; 0 when not delivered
}

func (g *geometry) len() int { return len(g.voxels) }

// appendGeometry stores a block: x, y, z as differences from the supervoxel before, which in preorder is mostly a
// neighbour; voxels; radius.
func appendGeometry(dst []byte, g *geometry) []byte {
	col := make([]uint64, g.len())
	for axis := range 3 {
		last := int64(0)
		for i, v := range g.at[axis] {
			col[i] = zigzag(int64(v) - last)
			last = int64(v)
		}
		dst = appendPlanes(dst, col)
	}
	for i, v := range g.voxels {
		col[i] = uint64(v)
	}
	dst = appendPlanes(dst, col)
	for i, v := range g.radius {
		col[i] = uint64(v)
	}
	return appendPlanes(dst, col)
}

// readGeometry reads a block of n supervoxels.
func readGeometry(src []byte, n int) (*geometry, error) {
	g := &geometry{voxels: make([]int64, n), radius: make([]uint32, n)}
	var col []uint64
	var err error
	for axis := range 3 {
		if col, src, err = readPlanes(src, n, col); err != nil {
			return nil, err
		}
		g.at[axis] = make([]int32, n)
		last := int64(0)
		for i, u := range col {
			last += unzigzag(u)
			if last != int64(int32(last)) {
				return nil, errDamaged
			}
			g.at[axis][i] = int32(last)
		}
	}
	if col, src, err = readPlanes(src, n, col); err != nil {
		return nil, err
	}
	for i, u := range col {
		g.voxels[i] = int64(u)
	}
	if col, src, err = readPlanes(src, n, col); err != nil {
		return nil, err
	}
	for i, u := range col {
		g.radius[i] = uint32(u)
	}
	if len(src) > 0 {
		return nil, errDamaged
	}
	return g, nil
}

func (g *geometry) point(i int) Point {
	return Point{float64(g.at[0][i]), float64(g.at[1][i]), float64(g.at[2][i])}
}

// Distance is the length of the straight line between two points, nm.
func (p Point) Distance(q Point) float64 { return math.Sqrt(p.distance2(q)) }

func (p Point) distance2(q Point) float64 {
	x, y, z := p[0]-q[0], p[1]-q[1], p[2]-q[2]
	return x*x + y*y + z*z
}

// ballRadius is the radius of a ball of as many voxels, nm.
func ballRadius(voxels int64, voxelNM [3]float64) float64 {
	volume := float64(voxels) * voxelNM[0] * voxelNM[1] * voxelNM[2]
	return math.Cbrt(volume * 3 / (4 * math.Pi))
}

// box is the smallest box around some supervoxels, nm.
type box struct{ min, max [3]int32 }

func emptyBox() box {
	const lo, hi = math.MinInt32, math.MaxInt32
	return box{min: [3]int32{hi, hi, hi}, max: [3]int32{lo, lo, lo}}
}

func (b *box) add(p [3]int32) {
	for i, v := range p {
		b.min[i], b.max[i] = min(b.min[i], v), max(b.max[i], v)
	}
}

// distance2 is the squared distance from a point to the box, 0 inside it.
func (b *box) distance2(p Point) float64 {
	var sum float64
	for i := range p {
		d := max(float64(b.min[i])-p[i], 0, p[i]-float64(b.max[i]))
		sum += d * d
	}
	return sum
}

// appendBoxes stores the boxes of all blocks.
func appendBoxes(dst []byte, boxes []box) []byte {
	col := make([]uint64, len(boxes))
	for axis := range 3 {
		for i, b := range boxes {
			col[i] = zigzag(int64(b.min[axis]))
		}
		dst = appendPlanes(dst, col)
		for i, b := range boxes {
			col[i] = uint64(int64(b.max[axis]) - int64(b.min[axis]))
		}
		dst = appendPlanes(dst, col)
	}
	return dst
}

func readBoxes(src []byte, n int) ([]box, error) {
	boxes := make([]box, n)
	var low, size []uint64
	var err error
	for axis := range 3 {
		if low, src, err = readPlanes(src, n, low); err != nil {
			return nil, err
		}
		if size, src, err = readPlanes(src, n, size); err != nil {
			return nil, err
		}
		for i := range boxes {
			v := unzigzag(low[i])
			boxes[i].min[axis], boxes[i].max[axis] = int32(v), int32(v+int64(size[i]))
		}
	}
	if len(src) > 0 {
		return nil, errDamaged
	}
	return boxes, nil
}
