package ledger

import (
	"context"
	"slices"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger/base"
)

// View loads a current segment: its supervoxels, accepted contacts and links, rejected contacts to others,
// synapses and nuclei. A retired id is answered with the current ids and the entries between; an unknown one is
// fault.NotFound. Time and memory are proportional to the segment, some 200 bytes a supervoxel.
func (v *Volume) View(ctx context.Context, segment ID) (*base.View, error) {
	for {
		if err := v.fresh(ctx); err != nil {
			return nil, err
		}
		seg, ok := v.state.lookup(segment)
		var ranges []base.Range
		if ok {
			ranges = v.state.ranges(seg.group)
		}
		v.mu.RUnlock()
		if !ok {
			return nil, v.explain(ctx, v.missing(ctx, segment))
		}
		w, err := v.base.View(ctx, v.pool, ranges)
		if err != nil {
			return nil, err
		}
		v.mu.RLock()
		_, ok = v.state.lookup(segment)
		if ok {
			w.Segment, w.Position = segment, v.state.position
			v.state.overlay(w)
		}
		v.mu.RUnlock()
		if ok {
			return w, nil
		}
		// Somebody's entry came between the two looks: the next round says so.
	}
}

// overlay brings what people said into a view of the base: cut contacts go, links come, and each contact that
// leaves names the segment it leads to now.
func (s *state) overlay(w *base.View) {
	if len(s.cuts) > 0 {
		w.Contacts = slices.DeleteFunc(w.Contacts, func(c base.Contact) bool {
			_, cut := s.cuts[[2]uint32{w.Ordinals[c.A], w.Ordinals[c.B]}]
			return cut
		})
	}
	linked := false
	for _, g := range s.linkedOrdinals(w.Ordinals) {
		a, _ := slices.BinarySearch(w.Ordinals, g)
		for other := range s.links[g] {
			if b, found := slices.BinarySearch(w.Ordinals, other); found && a < b {
				w.Contacts = append(w.Contacts, base.Contact{A: int32(a), B: int32(b), Affinity: 1, Link: true})
				linked = true
			}
		}
	}
	if linked {
		slices.SortFunc(w.Contacts, func(x, y base.Contact) int {
			return compareContacts(x, y)
		})
	}
	for i := range w.Outside {
		w.Outside[i].OtherSegment = s.idOf(s.groupOf(w.Outside[i].Other))
	}
}

func compareContacts(x, y base.Contact) int {
	switch {
	case x.A != y.A:
		return int(x.A - y.A)
	case x.B != y.B:
		return int(x.B - y.B)
	case x.Link == y.Link:
		return 0
	case y.Link:
		return -1
	}
	return 1
}

// linkedOrdinals picks the ordinals that carry a link, looking through the shorter list.
func (s *state) linkedOrdinals(of []uint32) []uint32 {
	var out []uint32
	if len(of) <= len(s.links) {
		for _, g := range of {
			if _, ok := s.links[g]; ok {
				out = append(out, g)
			}
		}
		return out
	}
	for g := range s.links {
		if _, ok := slices.BinarySearch(of, g); ok {
			out = append(out, g)
		}
	}
	return out
}

// missing says why an id is not a current segment: retired, or never seen.
func (v *Volume) missing(ctx context.Context, id ID) error {
	seg, err := v.Segment(ctx, id)
	if err != nil {
		return err
	}
	if seg.Retired > 0 {
		return &staleError{saw: []ID{id}}
	}
	return fault.Newf(fault.Busy, "segment-moving", "segment %s changed while it was read", id).WithNext("read it again")
}

// Near is the supervoxel nearest to a point.
type Near struct {
	Supervoxel ID
	Segment    ID
	Distance   float64 // nm, centre to point
}

// Nearest finds the supervoxel of a segment whose centre is nearest to a point in nm; with segment 0 it looks through the
// whole volume, which reads all of its geometry.
func (v *Volume) Nearest(ctx context.Context, segment ID, p base.Point) (Near, error) {
	if err := v.fresh(ctx); err != nil {
		return Near{}, err
	}
	ranges := []base.Range{{Lo: 0, Hi: uint32(v.info.Supervoxels)}}
	known := true
	if segment != 0 {
		var seg Segment
		if seg, known = v.state.lookup(segment); known {
			ranges = v.state.ranges(seg.group)
		}
	}
	v.mu.RUnlock()
	if !known {
		return Near{}, v.explain(ctx, v.missing(ctx, segment))
	}
	g, d, err := v.base.Nearest(ctx, v.pool, ranges, p)
	if err != nil {
		return Near{}, err
	}
	ids, err := v.base.SupervoxelIDs(ctx, v.pool, []uint32{g})
	if err != nil {
		return Near{}, err
	}
	v.mu.RLock()
	defer v.mu.RUnlock()
	return Near{Supervoxel: ids[0], Segment: v.state.idOf(v.state.groupOf(g)), Distance: d}, nil
}
