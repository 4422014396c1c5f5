package base

// packer makes the rows of base_block one after the other.
type packer struct {
	im     *importer
	digest *digester
	halves *merged[halfRecord]
	half   halfRecord // the next one, when more
	more   bool

	block int
	boxes []box
	ready [][]any
	tail  bool // segments and boxes are made
}

func (p *packer) next() ([]any, error) {
	for len(p.ready) == 0 {
		if p.tail {
			return nil, nil
		}
		if err := p.pack(); err != nil {
			return nil, err
		}
	}
	row := p.ready[0]
	p.ready = p.ready[1:]
	return row, nil
}

func (p *packer) put(section string, number int, content []byte, compress bool) {
	p.digest.block(section, content)
	p.ready = append(p.ready, []any{p.im.info.VolumeID, section, int32(number), seal(content, compress)})
}

// pack makes the next block's sections, or, after the last, what is not divided by ordinals.
func (p *packer) pack() error {
	if err := p.im.ctx.Err(); err != nil {
		return err
	}
	im, l := p.im, p.im.layout
	lo := p.block * blockSize
	if lo >= im.sv.len() {
		for i := 0; i*blockSize < len(im.segments); i++ {
			p.put(sectionSegments, i, appendSegments(nil, im.segments[i*blockSize:min(len(im.segments), (i+1)*blockSize)]), true)
		}
		p.put(sectionBoxes, 0, appendBoxes(nil, p.boxes), true)
		p.tail = true
		return nil
	}
	ranks := l.rank[lo:min(im.sv.len(), lo+blockSize)]
	n := len(ranks)
	g := &geometry{voxels: permuted(im.sv.voxels, ranks), radius: permuted(im.sv.radius, ranks)}
	around := emptyBox()
	for _, at := range permuted(im.sv.at, ranks) {
		around.add(at)
		for axis, v := range at {
			g.at[axis] = append(g.at[axis], v)
		}
	}
	p.boxes = append(p.boxes, around)
	p.put(sectionIDs, p.block, appendIDs(nil, permuted(im.sv.ids, ranks)), false)
	p.put(sectionGeometry, p.block, appendGeometry(nil, g), true)
	accepted, rejected, err := p.touches(uint32(lo), n)
	if err != nil {
		return err
	}
	p.put(sectionAccepted, p.block, appendTouches(nil, accepted, uint32(lo)), true)
	p.put(sectionRejected, p.block, appendTouches(nil, rejected, uint32(lo)), true)
	if im.truth != nil {
		p.put(sectionTruth, p.block, appendTruths(nil, &truths{permuted(im.truth.has, ranks), permuted(im.truth.neuron, ranks)}), true)
	}
	p.block++
	im.progress("storing supervoxels", int64(lo+n), int64(im.sv.len()), "supervoxels")
	return nil
}

// touches takes the contacts of one block from the sorted stream.
func (p *packer) touches(lo uint32, n int) (accepted, rejected *touches, err error) {
	accepted, rejected = &touches{start: make([]uint32, n+1)}, &touches{start: make([]uint32, n+1)}
	for p.more && p.half.at < lo+uint32(n) {
		t := accepted
		if p.half.rejected {
			t = rejected
		}
		t.start[p.half.at-lo+1]++
		t.other = append(t.other, p.half.other)
		t.affinity = append(t.affinity, p.half.affinity)
		t.area = append(t.area, p.half.area)
		if p.more, err = p.halves.next(&p.half); err != nil {
			return nil, nil, err
		}
	}
	for _, t := range []*touches{accepted, rejected} {
		for i := range n {
			t.start[i+1] += t.start[i]
		}
		t.dropEmptyAreas()
	}
	return accepted, rejected, nil
}
