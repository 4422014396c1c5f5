package base

import "math"

// Affinity is stored in 8 bits: code q stands for (q + 0.5) / 256. Code 0 is kept for assumed links, so that the
// smallest affinities read as 1.5 / 256.
const assumedCode = 0

func affinityCode(p float64) uint8 { return uint8(min(255, max(1, math.Floor(p*256)))) }

func affinityOf(code uint8) float64 {
	if code == assumedCode {
		return 0
	}
	return (float64(code) + 0.5) / 256
}

// Area is stored in 8 bits: code c stands for 1.09^(c-1) nm², so that it is right within 5 % from 1 nm² to 3 mm².
// Code 0: not delivered.
const areaStep = 1.09

func areaCode(nm2 float64) uint8 {
	if nm2 <= 0 {
		return 0
	}
	return uint8(min(255, max(1, 1+math.Round(math.Log(nm2)/math.Log(areaStep)))))
}

var areas = func() (a [256]float64) {
	for c := 1; c < len(a); c++ {
		a[c] = math.Pow(areaStep, float64(c-1))
	}
	return a
}()

// touches is the contacts of a block, either those that were accepted or those that were rejected. One with both
// ends in the block is listed under its lower end alone; one that leaves the block is listed in both blocks, under
// the end that is in each. So whichever end one comes from, its block has it.
type touches struct {
	start    []uint32 // of the i-th supervoxel: start[i] to start[i+1]
	other    []uint32 // ordinal of the other end, ascending
	affinity []uint8
	area     []uint8 // nil when none has any
}

func (t *touches) len() int { return len(t.start) - 1 }

// appendTouches stores a block whose first ordinal is lo: how many each supervoxel has, how far the other end is,
// affinities, areas.
func appendTouches(dst []byte, t *touches, lo uint32) []byte {
	col := make([]uint64, max(t.len(), len(t.other)))
	for i := range t.len() {
		col[i] = uint64(t.start[i+1] - t.start[i])
	}
	dst = appendPlanes(dst, col[:t.len()])
	for i := range t.len() {
		for k := t.start[i]; k < t.start[i+1]; k++ {
			col[k] = zigzag(int64(t.other[k]) - int64(lo) - int64(i))
		}
	}
	dst = appendPlanes(dst, col[:len(t.other)])
	dst = append(dst, t.affinity...)
	return append(dst, t.area...)
}

// readTouches reads a block of n supervoxels whose first ordinal is lo.
func readTouches(src []byte, n int, lo uint32) (*touches, error) {
	t := &touches{start: make([]uint32, n+1)}
	col, src, err := readPlanes(src, n, nil)
	if err != nil {
		return nil, err
	}
	var total uint64
	for i, d := range col {
		if total += d; d > largestBlock || total > largestBlock {
			return nil, errDamaged
		}
		t.start[i+1] = uint32(total)
	}
	m := int(total)
	if m > 0 && len(src) < m { // affinities alone take that much: refuse before memory is asked for
		return nil, errDamaged
	}
	if col, src, err = readPlanes(src, m, col); err != nil {
		return nil, err
	}
	t.other = make([]uint32, m)
	for i := range n {
		for k := t.start[i]; k < t.start[i+1]; k++ {
			other := int64(lo) + int64(i) + unzigzag(col[k])
			if other < 0 || other > math.MaxUint32 {
				return nil, errDamaged
			}
			t.other[k] = uint32(other)
		}
	}
	switch len(src) {
	case m:
		t.affinity = src
	case 2 * m:
		t.affinity, t.area = src[:m], src[m:]
	default:
		return nil, errDamaged
	}
	return t, nil
}

func (t *touches) areaOf(k uint32) float64 {
	if t.area == nil {
		return 0
	}
	return areas[t.area[k]]
}

// dropEmptyAreas leaves areas out of a block where none was delivered.
func (t *touches) dropEmptyAreas() {
	for _, a := range t.area {
		if a != 0 {
			return
		}
	}
	t.area = nil
}
