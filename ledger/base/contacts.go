package base

import (
	"encoding/binary"
	"fmt"
	"math"
)

// contactRecord is a contact by ranks, a < b.
type contactRecord struct {
	a, b           uint32
	affinity, area float64
	line           int64
}

// pairKey sorts by the first, then the second.
func pairKey(a, b uint32) uint64 { return uint64(a)<<32 | uint64(b) }

var contactRecords = record[contactRecord]{
	size: 32,
	put: func(b []byte, c *contactRecord) {
		binary.LittleEndian.PutUint32(b, c.a)
		binary.LittleEndian.PutUint32(b[4:], c.b)
		binary.LittleEndian.PutUint64(b[8:], math.Float64bits(c.affinity))
		binary.LittleEndian.PutUint64(b[16:], math.Float64bits(c.area))
		binary.LittleEndian.PutUint64(b[24:], uint64(c.line))
	},
	get: func(b []byte, c *contactRecord) {
		c.a, c.b = binary.LittleEndian.Uint32(b), binary.LittleEndian.Uint32(b[4:])
		c.affinity = math.Float64frombits(binary.LittleEndian.Uint64(b[8:]))
		c.area = math.Float64frombits(binary.LittleEndian.Uint64(b[16:]))
		c.line = int64(binary.LittleEndian.Uint64(b[24:]))
	},
	key: func(c contactRecord) (uint64, uint64) { return pairKey(c.a, c.b), uint64(c.line) },
}

// supervoxel looks up a supervoxel that a row names.
func (im *importer) supervoxel(t *table, r *row, c int) (rank uint32, ok bool) {
	id := r.cells[c].id
	rank, ok = im.sv.index.find(uint64(id))
	if !ok && !im.sv.gaps {
		im.problems.add(t.name, r.line, t.columns[c].name, id.String(), "is not in table supervoxels")
	}
	return rank, ok
}

// readContacts reads and checks the table and sorts it by pairs.
func (im *importer) readContacts() error {
	t := contactTable
	im.contacts = newSorter(im.tmp, contactRecords)
	return im.each(t, func(r *row) error {
		if r.bad() {
			return nil
		}
		affinity, area := r.cells[2].number, r.cells[3].number
		if affinity < 0 || affinity > 1 {
			im.problems.add(t.name, r.line, "affinity", fmt.Sprint(affinity), "is not between 0 and 1")
		}
		if area < 0 {
			im.problems.add(t.name, r.line, "area_nm2", fmt.Sprint(area), "is below 0")
		}
		if r.cells[0].id == r.cells[1].id {
			im.problems.add(t.name, r.line, "b_supervoxel_id", r.cells[1].id.String(), "touches itself: both sides are one supervoxel")
			return nil
		}
		a, okA := im.supervoxel(t, r, 0)
		b, okB := im.supervoxel(t, r, 1)
		if !okA || !okB {
			return nil
		}
		return im.contacts.add(contactRecord{min(a, b), max(a, b), affinity, area, r.line})
	})
}

// distinctContacts yields each pair once, in order. repeated, if not nil, is told of the others.
func (im *importer) distinctContacts(yield func(*contactRecord) error, repeated func(first, again *contactRecord)) error {
	m, err := im.contacts.sorted()
	if err != nil {
		return err
	}
	defer m.close()
	var last, c contactRecord // of a pair, a is never b: the zero record equals none
	for n := 0; ; n++ {
		if err := im.alive(n); err != nil {
			return err
		}
		if ok, err := m.next(&c); !ok || err != nil {
			return err
		}
		if c.a == last.a && c.b == last.b {
			if repeated != nil {
				repeated(&last, &c)
			}
			continue
		}
		last = c
		if err := yield(&c); err != nil {
			return err
		}
	}
}

// judgeContacts counts, judges duplicates, and sends accepted contacts on their way into the spanning forest.
func (im *importer) judgeContacts() error {
	im.edges = newSorter(im.tmp, treeEdgeRecords)
	var same, firstSame int64
	err := im.distinctContacts(func(c *contactRecord) error {
		im.info.Contacts++
		if im.sv.segment[c.a] != im.sv.segment[c.b] {
			im.info.Rejected++
			return nil
		}
		return im.edges.add(treeEdge{255 - affinityCode(c.affinity), im.sv.distance2(c.a, c.b), c.a, c.b})
	}, func(first, again *contactRecord) {
		if first.affinity == again.affinity && first.area == again.area {
			if same++; same == 1 {
				firstSame = again.line
			}
			return
		}
		column, value := "affinity", again.affinity
		if first.affinity == again.affinity {
			column, value = "area_nm2", again.area
		}
		im.problems.add(contactTable.name, again.line, column, fmt.Sprint(value), fmt.Sprintf(
			"contradicts line %d, which is about the same two supervoxels (%d and %d)", first.line, im.sv.ids[first.a], im.sv.ids[first.b]))
	})
	if same > 0 {
		im.warnf("%s there more than once with the same values, the first repetition on line %d", plural(int(same), "contact is", "contacts are"), firstSame)
	}
	return err
}

var treeEdgeRecords = record[treeEdge]{
	size: 17,
	put: func(b []byte, e *treeEdge) {
		b[0] = e.weakness
		binary.LittleEndian.PutUint64(b[1:], e.length2)
		binary.LittleEndian.PutUint32(b[9:], e.a)
		binary.LittleEndian.PutUint32(b[13:], e.b)
	},
	get: func(b []byte, e *treeEdge) {
		*e = treeEdge{b[0], binary.LittleEndian.Uint64(b[1:]), binary.LittleEndian.Uint32(b[9:]), binary.LittleEndian.Uint32(b[13:])}
	},
	key: treeEdge.key,
}

// halfRecord is a contact as one block lists it: under the end at.
type halfRecord struct {
	at, other      uint32 // ordinals
	affinity, area uint8
	rejected       bool
}

var halfRecords = record[halfRecord]{
	size: 11,
	put: func(b []byte, h *halfRecord) {
		binary.LittleEndian.PutUint32(b, h.at)
		binary.LittleEndian.PutUint32(b[4:], h.other)
		b[8], b[9], b[10] = h.affinity, h.area, 0
		if h.rejected {
			b[10] = 1
		}
	},
	get: func(b []byte, h *halfRecord) {
		*h = halfRecord{binary.LittleEndian.Uint32(b), binary.LittleEndian.Uint32(b[4:]), b[8], b[9], b[10] == 1}
	},
	key: func(h halfRecord) (uint64, uint64) { return pairKey(h.at, h.other), 0 },
}

// placeContacts sorts contacts and assumed links into the order of blocks.
func (im *importer) placeContacts() error {
	im.halves = newSorter(im.tmp, halfRecords)
	place := func(a, b uint32, h halfRecord) error {
		a, b = im.layout.ordinal[a], im.layout.ordinal[b]
		h.at, h.other = min(a, b), max(a, b)
		if err := im.halves.add(h); err != nil || h.at/blockSize == h.other/blockSize {
			return err
		}
		h.at, h.other = h.other, h.at
		return im.halves.add(h)
	}
	err := im.distinctContacts(func(c *contactRecord) error {
		return place(c.a, c.b, halfRecord{
			affinity: affinityCode(c.affinity), area: areaCode(c.area), rejected: im.sv.segment[c.a] != im.sv.segment[c.b],
		})
	}, nil)
	if err != nil {
		return err
	}
	im.contacts.drop()
	for _, e := range im.layout.assumed {
		if err := place(e[0], e[1], halfRecord{affinity: assumedCode}); err != nil {
			return err
		}
	}
	return nil
}
