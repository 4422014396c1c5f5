package base

// connectParts gives every base segment that its accepted contacts leave in parts the missing links, the shortest
// that do (a minimum spanning tree of the parts, Borůvka 1926).
func (l *layout) connectParts(start, members []uint32) {
	parts := make([]uint32, len(l.sv.segments))
	for r := range l.sets {
		if l.find(uint32(r)) == uint32(r) {
			parts[l.sv.segment[r]]++
		}
	}
	for s, n := range parts {
		for n > 1 {
			n -= l.linkParts(members[start[s]:start[s+1]])
		}
	}
}

// link is a candidate: of two, the shorter is better, then the one with the smaller ranks.
type link struct {
	length2 uint64
	a, b    uint32
}

func (x link) better(y link) bool {
	if x.length2 != y.length2 {
		return x.length2 < y.length2
	}
	return x.a < y.a || x.a == y.a && x.b < y.b
}

// linkParts joins every part but the largest to the part nearest to it, and tells how many links that took.
func (l *layout) linkParts(members []uint32) (made uint32) {
	size := make(map[uint32]int)
	for _, r := range members {
		size[l.find(r)]++
	}
	largest := l.find(members[0])
	for part, n := range size {
		if n > size[largest] || n == size[largest] && part < largest {
			largest = part
		}
	}
	best := make(map[uint32]link)
	for _, a := range members {
		part := l.find(a)
		if part == largest {
			continue
		}
		for _, b := range members {
			if l.find(b) == part {
				continue
			}
			x := link{l.sv.distance2(a, b), min(a, b), max(a, b)}
			if y, ok := best[part]; !ok || x.better(y) {
				best[part] = x
			}
		}
	}
	for _, x := range best {
		if l.join(x.a, x.b) {
			l.assumed = append(l.assumed, [2]uint32{x.a, x.b})
			made++
		}
	}
	return made
}
