package base

import "math/bits"

// idIndex finds the place of an id in a list that is kept elsewhere: an open-addressing hash table of places, linear
// probing, three quarters full. 5.4 bytes an id and two cache misses a look-up, however the ids are spread; it is
// built from the ids when a base is opened, so that nothing of it is stored.
type idIndex struct {
	ids   []uint64
	slots []uint32 // place + 1; 0 is free
}

// newIDIndex indexes a list. Of equal ids the first is found.
func newIDIndex(ids []uint64) *idIndex {
	x := &idIndex{ids: ids, slots: make([]uint32, len(ids)/3*4+len(ids)%3*2+1)}
	for i, id := range ids {
		s := x.slot(id)
		for x.slots[s] != 0 && ids[x.slots[s]-1] != id {
			s = x.after(s)
		}
		if x.slots[s] == 0 {
			x.slots[s] = uint32(i) + 1
		}
	}
	return x
}

// slot is where the search for an id begins: the id well mixed (the finaliser of SplitMix64, Steele, Lea and Flood
// 2014), scaled to the table's length.
func (x *idIndex) slot(id uint64) int {
	id = (id ^ id>>30) * 0xbf58476d1ce4e5b9
	id = (id ^ id>>27) * 0x94d049bb133111eb
	id ^= id >> 31
	high, _ := bits.Mul64(id, uint64(len(x.slots)))
	return int(high)
}

func (x *idIndex) after(s int) int {
	if s++; s < len(x.slots) {
		return s
	}
	return 0
}

// find is the place of an id.
func (x *idIndex) find(id uint64) (place uint32, ok bool) {
	for s := x.slot(id); x.slots[s] != 0; s = x.after(s) {
		if at := x.slots[s] - 1; x.ids[at] == id {
			return at, true
		}
	}
	return 0, false
}
