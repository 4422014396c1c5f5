package base

import (
	"errors"
	"slices"
)

// arrange decides ordinals and sorts everything into their order.
func (im *importer) arrange() error {
	n := int64(im.sv.len())
	im.progress("arranging", 0, n, "supervoxels")
	im.layout = newLayout(im.sv)
	m, err := im.edges.sorted()
	if err != nil {
		return err
	}
	defer m.close()
	var e treeEdge
	for k := 0; ; k++ {
		if err := im.alive(k); err != nil {
			return err
		}
		ok, err := m.next(&e)
		if err != nil {
			return err
		}
		if !ok {
			break
		}
		im.layout.join(e.a, e.b)
	}
	im.edges.drop()
	im.layout.arrange()
	im.countSegments()
	im.progress("arranging", n/2, n, "supervoxels")
	if err := im.placeContacts(); err != nil {
		return err
	}
	if err := im.placeSynapses(); err != nil {
		return err
	}
	im.placeNuclei()
	im.info.Supervoxels, im.info.Segments = n, int64(len(im.segments))
	im.info.Layout = layoutVersion
	im.info.MintFrom, err = mintFrom(im.sv.ids, im.sv.segments)
	im.progress("arranging", n, n, "supervoxels")
	return err
}

// countSegments makes the table of base segments, all but synapses and nuclei.
func (im *importer) countSegments() {
	l := im.layout
	im.segments = make([]segmentRecord, len(l.numbers))
	for n, s := range l.numbers {
		im.segments[n] = segmentRecord{id: im.sv.segments[s], lo: l.lo[n], box: emptyBox()}
	}
	n := -1
	for g, r := range l.rank {
		if n+1 < len(l.lo) && uint32(g) == l.lo[n+1] {
			n++
		}
		seg := &im.segments[n]
		seg.size++
		seg.voxels += im.sv.voxels[r]
		seg.box.add(im.sv.at[r])
	}
	im.noteAssumed()
}

// noteAssumed counts and reports the links that no contact stands behind.
func (im *importer) noteAssumed() {
	l := im.layout
	im.info.Assumed = int64(len(l.assumed))
	for _, e := range l.assumed {
		im.segmentOf(l.ordinal[e[0]]).assumed++
	}
	parted, first := 0, uint64(0)
	for _, s := range im.segments {
		if s.assumed > 0 {
			if parted++; parted == 1 || s.id < first {
				first = s.id
			}
		}
	}
	if parted > 0 {
		im.warnf("%s, the first is %d; %s assumed",
			plural(parted, "base segment is not held together by its contacts", "base segments are not held together by their contacts"), first,
			plural(len(l.assumed), "link to the nearest pieces was", "links to the nearest pieces were"))
	}
}

// segmentOf is the base segment of an ordinal.
func (im *importer) segmentOf(g uint32) *segmentRecord {
	n, found := slices.BinarySearch(im.layout.lo, g)
	if !found {
		n--
	}
	return &im.segments[n]
}

// mintRoom is how many ids must be free in a row for the ledger to mint from.
const mintRoom = 1 << 32

// mintFrom finds ids that were not delivered: the lowest multiple of 2^32 above 0 from which 2^32 are free. Both lists
// ascend.
func mintFrom(supervoxels, segments []uint64) (ID, error) {
	next := uint64(1) // in units of mintRoom
	for len(supervoxels) > 0 || len(segments) > 0 {
		var id uint64
		if len(segments) == 0 || len(supervoxels) > 0 && supervoxels[0] <= segments[0] {
			id, supervoxels = supervoxels[0], supervoxels[1:]
		} else {
			id, segments = segments[0], segments[1:]
		}
		if id/mintRoom > next {
			break
		}
		if id/mintRoom == next {
			next++
		}
	}
	if next >= mintRoom {
		return 0, errors.New("base: no run of 2^32 free ids is left")
	}
	return ID(next * mintRoom), nil
}
