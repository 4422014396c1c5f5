package base

import (
	"cmp"
	"encoding/binary"
	"fmt"
	"math"
	"slices"
)

// synapseRecord is a synapse; its sides are ranks while it is read and ordinals when it is sorted.
type synapseRecord struct {
	id          uint64
	pre, post   uint32
	at          [3]int32 // nm
	confidence  float64
	transmitter uint16 // into importer.transmitters; 0 when not delivered
}

var synapseRecords = record[synapseRecord]{
	size: 38,
	put: func(b []byte, s *synapseRecord) {
		binary.LittleEndian.PutUint64(b, s.id)
		binary.LittleEndian.PutUint32(b[8:], s.pre)
		binary.LittleEndian.PutUint32(b[12:], s.post)
		for i, v := range s.at {
			binary.LittleEndian.PutUint32(b[16+4*i:], uint32(v))
		}
		binary.LittleEndian.PutUint64(b[28:], math.Float64bits(s.confidence))
		binary.LittleEndian.PutUint16(b[36:], s.transmitter)
	},
	get: func(b []byte, s *synapseRecord) {
		s.id = binary.LittleEndian.Uint64(b)
		s.pre, s.post = binary.LittleEndian.Uint32(b[8:]), binary.LittleEndian.Uint32(b[12:])
		for i := range s.at {
			s.at[i] = int32(binary.LittleEndian.Uint32(b[16+4*i:]))
		}
		s.confidence = math.Float64frombits(binary.LittleEndian.Uint64(b[28:]))
		s.transmitter = binary.LittleEndian.Uint16(b[36:])
	},
	key: func(s synapseRecord) (uint64, uint64) { return pairKey(s.pre, s.post), s.id },
}

// seenID is an id and where it was seen, to find duplicates by sorting.
type seenID struct {
	id   uint64
	line int64
}

var seenIDs = record[seenID]{
	size: 16,
	put: func(b []byte, s *seenID) {
		binary.LittleEndian.PutUint64(b, s.id)
		binary.LittleEndian.PutUint64(b[8:], uint64(s.line))
	},
	get: func(b []byte, s *seenID) {
		s.id, s.line = binary.LittleEndian.Uint64(b), int64(binary.LittleEndian.Uint64(b[8:]))
	},
	key: func(s seenID) (uint64, uint64) { return s.id, uint64(s.line) },
}

// noteDuplicates tells of ids that are there more than once.
func (im *importer) noteDuplicates(t *table, seen *sorter[seenID]) error {
	m, err := seen.sorted()
	if err != nil {
		return err
	}
	defer seen.drop()
	defer m.close()
	var last, s seenID
	for {
		if ok, err := m.next(&s); !ok || err != nil {
			return err
		}
		if s.id == last.id && last.line > 0 {
			im.problems.add(t.name, s.line, t.columns[0].name, ID(s.id).String(), fmt.Sprintf("%s, first on line %d", reasonTwice, last.line))
			continue
		}
		last = s
	}
}

// mostTransmitters bounds the distinct transmitters, of which the trade knows a dozen.
const mostTransmitters = 1000

// readSynapses reads and checks the table. The records keep the order of the file until ordinals are known.
func (im *importer) readSynapses() error {
	t := synapseTable
	seen := newSorter(im.tmp, seenIDs)
	im.synapses = newSorter(im.tmp, synapseRecords)
	im.transmitters = []string{""}
	outside, all := outside{bounds: im.info.Bounds}, 0
	err := im.each(t, func(r *row) error {
		if r.bad() {
			return nil
		}
		if p := r.cells[6].number; p < 0 || p > 1 {
			im.problems.add(t.name, r.line, "confidence", fmt.Sprint(p), "is not between 0 and 1")
		}
		s := synapseRecord{id: uint64(r.cells[0].id), at: im.point(t, r, 3), confidence: r.cells[6].number}
		outside.see(s.at, r.line)
		all++
		var okPre, okPost bool
		s.pre, okPre = im.supervoxel(t, r, 1)
		s.post, okPost = im.supervoxel(t, r, 2)
		k := slices.Index(im.transmitters, r.cells[7].text)
		if k < 0 {
			if k = len(im.transmitters); k > mostTransmitters {
				im.problems.add(t.name, r.line, "transmitter", r.cells[7].text, fmt.Sprintf("is one more than %d different transmitters", mostTransmitters))
				k = 0
			} else {
				im.transmitters = append(im.transmitters, r.cells[7].text)
			}
		}
		s.transmitter = uint16(k)
		if err := seen.add(seenID{s.id, r.line}); err != nil || !okPre || !okPost {
			return err
		}
		return im.synapses.add(s)
	})
	if err != nil {
		return err
	}
	im.warnOutside(t, all, outside)
	return im.noteDuplicates(t, seen)
}

// placeSynapses turns ranks into ordinals and counts.
func (im *importer) placeSynapses() error {
	m, err := im.synapses.sorted()
	if err != nil {
		return err
	}
	defer m.close()
	placed := newSorter(im.tmp, synapseRecords)
	var s synapseRecord
	for n := 0; ; n++ {
		if err := im.alive(n); err != nil {
			return err
		}
		ok, err := m.next(&s)
		if err != nil {
			return err
		}
		if !ok {
			break
		}
		im.info.Synapses++
		s.pre, s.post = im.layout.ordinal[s.pre], im.layout.ordinal[s.post]
		im.segmentOf(s.pre).out++
		im.segmentOf(s.post).in++
		if err := placed.add(s); err != nil {
			return err
		}
	}
	im.synapses.drop()
	im.synapses = placed
	return nil
}

// nucleusRecord is a nucleus; at is a rank while it is read, then an ordinal.
type nucleusRecord struct {
	id     uint64
	at     uint32
	point  [3]int32
	volume float64 // nm³
}

// readNuclei reads and checks the table. Nuclei are as few as cells, so they stay in memory.
func (im *importer) readNuclei() error {
	t := nucleusTable
	seen := newSorter(im.tmp, seenIDs)
	err := im.each(t, func(r *row) error {
		if r.bad() {
			return nil
		}
		if v := r.cells[5].number; v < 0 {
			im.problems.add(t.name, r.line, "volume_nm3", fmt.Sprint(v), "is below 0")
		}
		n := nucleusRecord{id: uint64(r.cells[0].id), point: im.point(t, r, 2), volume: r.cells[5].number}
		var ok bool
		if n.at, ok = im.supervoxel(t, r, 1); ok {
			im.nuclei = append(im.nuclei, n)
		}
		return seen.add(seenID{n.id, r.line})
	})
	if err != nil {
		return err
	}
	slices.SortFunc(im.nuclei, func(a, b nucleusRecord) int { return cmp.Compare(a.id, b.id) })
	return im.noteDuplicates(t, seen)
}

func (im *importer) placeNuclei() {
	im.info.Nuclei = int64(len(im.nuclei))
	for i := range im.nuclei {
		n := &im.nuclei[i]
		n.at = im.layout.ordinal[n.at]
		im.segmentOf(n.at).nuclei++
	}
}

// readTruth reads and checks the table, which may be absent.
func (im *importer) readTruth() error {
	t := truthTable
	if im.files[t.name] == "" {
		return nil
	}
	im.info.HasTruth = true
	im.truth = &truths{has: make([]bool, im.sv.len()), neuron: make([]uint64, im.sv.len())}
	return im.each(t, func(r *row) error {
		if r.bad() {
			return nil
		}
		rank, ok := im.supervoxel(t, r, 0)
		switch {
		case !ok:
		case im.truth.has[rank]:
			im.problems.add(t.name, r.line, "supervoxel_id", r.cells[0].id.String(), reasonTwice)
		default:
			im.truth.has[rank], im.truth.neuron[rank] = true, uint64(r.cells[1].id)
			im.info.Truth++
		}
		return nil
	})
}
