package base

import (
	"encoding/binary"
)

// segmentRecord is a base segment in memory.
type segmentRecord struct {
	id              uint64
	lo, size        uint32
	voxels          int64
	in, out, nuclei uint64
	assumed         uint32
	box             box
}

func (s *segmentRecord) totals() Totals {
	t := Totals{
		Supervoxels: int64(s.size), Voxels: s.voxels,
		SynapsesIn: int64(s.in), SynapsesOut: int64(s.out), Nuclei: int64(s.nuclei),
	}
	for i := range 3 {
		t.Min[i], t.Max[i] = float64(s.box.min[i]), float64(s.box.max[i])
	}
	return t
}

// segmentColumns are the columns of the segments section but ids and boxes, which are stored apart.
var segmentColumns = []struct {
	get func(*segmentRecord) uint64
	set func(*segmentRecord, uint64)
}{
	{func(s *segmentRecord) uint64 { return uint64(s.size) }, func(s *segmentRecord, v uint64) { s.size = uint32(v) }},
	{func(s *segmentRecord) uint64 { return uint64(s.voxels) }, func(s *segmentRecord, v uint64) { s.voxels = int64(v) }},
	{func(s *segmentRecord) uint64 { return s.in }, func(s *segmentRecord, v uint64) { s.in = v }},
	{func(s *segmentRecord) uint64 { return s.out }, func(s *segmentRecord, v uint64) { s.out = v }},
	{func(s *segmentRecord) uint64 { return s.nuclei }, func(s *segmentRecord, v uint64) { s.nuclei = v }},
	{func(s *segmentRecord) uint64 { return uint64(s.assumed) }, func(s *segmentRecord, v uint64) { s.assumed = uint32(v) }},
}

// appendSegments stores consecutive base segments.
func appendSegments(dst []byte, segs []segmentRecord) []byte {
	boxes := make([]box, len(segs))
	for i := range segs {
		dst = binary.LittleEndian.AppendUint64(dst, segs[i].id)
		boxes[i] = segs[i].box
	}
	col := make([]uint64, len(segs))
	for _, c := range segmentColumns {
		for i := range segs {
			col[i] = c.get(&segs[i])
		}
		dst = appendPlanes(dst, col)
	}
	return appendBoxes(dst, boxes)
}

// readSegments reads n base segments of which the first begins at ordinal lo.
func readSegments(src []byte, n int, lo uint32) ([]segmentRecord, error) {
	ids, src, err := readIDs(src, n)
	if err != nil {
		return nil, err
	}
	segs := make([]segmentRecord, n)
	var col []uint64
	for _, c := range segmentColumns {
		if col, src, err = readPlanes(src, n, col); err != nil {
			return nil, err
		}
		for i := range segs {
			c.set(&segs[i], col[i])
		}
	}
	boxes, err := readBoxes(src, n)
	if err != nil {
		return nil, err
	}
	for i := range segs {
		segs[i].id, segs[i].lo, segs[i].box = ids[i], lo, boxes[i]
		lo += segs[i].size
	}
	return segs, nil
}

// appendIDs stores ids as they are: random ones cannot be made smaller.
func appendIDs(dst []byte, ids []uint64) []byte {
	for _, id := range ids {
		dst = binary.LittleEndian.AppendUint64(dst, id)
	}
	return dst
}

func readIDs(src []byte, n int) (ids []uint64, rest []byte, err error) {
	if len(src)/8 < n {
		return nil, nil, errDamaged
	}
	ids = make([]uint64, n)
	for i := range ids {
		ids[i] = binary.LittleEndian.Uint64(src[8*i:])
	}
	return ids, src[8*n:], nil
}

// truths is the true neurons of the supervoxels of a block.
type truths struct {
	has    []bool
	neuron []uint64
}

func appendTruths(dst []byte, t *truths) []byte {
	col := make([]uint64, len(t.has))
	for i, has := range t.has {
		if has {
			col[i] = 1
		}
	}
	return appendPlanes(appendPlanes(dst, col), t.neuron)
}

func readTruths(src []byte, n int) (*truths, error) {
	col, src, err := readPlanes(src, n, nil)
	if err != nil {
		return nil, err
	}
	t := &truths{has: make([]bool, n)}
	for i, v := range col {
		t.has[i] = v == 1
	}
	if t.neuron, src, err = readPlanes(src, n, nil); err != nil || len(src) > 0 {
		return nil, errDamaged
	}
	return t, nil
}
