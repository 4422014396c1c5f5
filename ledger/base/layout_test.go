package base

import (
	"cmp"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// someSupervoxels are n supervoxels of one segment at random points of a coarse grid, where many distances are equal.
func someSupervoxels(rng *rand.Rand, n int) *supervoxels {
	s := &supervoxels{segments: []uint64{7}, segment: make([]uint32, n)}
	for k := range n {
		s.ids = append(s.ids, uint64(k+1))
		s.voxels = append(s.voxels, rng.Int64N(5)+1)
		s.at = append(s.at, [3]int32{rng.Int32N(9) * 100, rng.Int32N(9) * 100, rng.Int32N(9) * 100})
	}
	return s
}

// TestSubtreesAreRanges: whatever edge of the forest is cut, one of the two sides is one range of ordinals.
func TestSubtreesAreRanges(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1))
		n := rapid.IntRange(1, 60).Draw(t, "n")
		l := newLayout(someSupervoxels(rng, n))
		for range n {
			l.join(uint32(rng.IntN(n)), uint32(rng.IntN(n)))
		}
		l.arrange()
		if len(l.tree) != n-1 {
			t.Fatalf("%d edges hold %d supervoxels", len(l.tree), n)
		}
		for k := range l.tree {
			rest := newLayout(l.sv)
			for j, e := range l.tree {
				if j != k {
					rest.join(e[0], e[1])
				}
			}
			if !isRange(l, rest, l.tree[k][0]) && !isRange(l, rest, l.tree[k][1]) {
				t.Fatalf("without %v neither side is a range: %v", l.tree[k], l.ordinal)
			}
		}
	})
}

// isRange says whether the set of rest that holds a rank is one range of l's ordinals.
func isRange(l, rest *layout, a uint32) bool {
	lo, hi, n := uint32(math.MaxUint32), uint32(0), uint32(0)
	for r, g := range l.ordinal {
		if rest.find(uint32(r)) == rest.find(a) {
			lo, hi, n = min(lo, g), max(hi, g), n+1
		}
	}
	return hi-lo+1 == n
}

// TestAssumedLinksAreShortest compares with the minimum spanning tree over all pairs (Kruskal 1956).
func TestAssumedLinksAreShortest(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 2))
		n := rapid.IntRange(1, 120).Draw(t, "n")
		sv := someSupervoxels(rng, n)
		l, plain := newLayout(sv), newLayout(sv)
		for range rapid.IntRange(0, n).Draw(t, "contacts") {
			a, b := uint32(rng.IntN(n)), uint32(rng.IntN(n))
			l.join(a, b)
			plain.join(a, b)
		}
		l.arrange()

		var all []link
		for a := range uint32(n) {
			for b := a + 1; b < uint32(n); b++ {
				all = append(all, link{sv.distance2(a, b), a, b})
			}
		}
		slices.SortFunc(all, func(x, y link) int {
			return cmp.Or(cmp.Compare(x.length2, y.length2), cmp.Compare(x.a, y.a), cmp.Compare(x.b, y.b))
		})
		var want [][2]uint32
		for _, x := range all {
			if plain.join(x.a, x.b) {
				want = append(want, [2]uint32{x.a, x.b})
			}
		}
		got := slices.Clone(l.assumed)
		for _, links := range [][][2]uint32{got, want} {
			slices.SortFunc(links, func(x, y [2]uint32) int { return cmp.Or(cmp.Compare(x[0], y[0]), cmp.Compare(x[1], y[1])) })
		}
		if !slices.Equal(got, want) {
			t.Fatalf("assumed %v, want %v", got, want)
		}
	})
}

// TestMintFromIsFree: the run begins at a multiple of 2^32 and nothing that was delivered lies in it.
func TestMintFromIsFree(t *testing.T) {
	for _, c := range []struct {
		supervoxels, segments []uint64
		want                  ID
	}{
		{nil, nil, 1 << 32},
		{[]uint64{1, 2, 3}, []uint64{7}, 1 << 32},
		{[]uint64{1 << 32}, []uint64{2<<32 + 5}, 3 << 32},
		{[]uint64{1<<33 - 1, 2 << 32}, []uint64{2 << 32, 4 << 32}, 3 << 32},
		{[]uint64{1 << 63, math.MaxUint64}, []uint64{5}, 1 << 32},
	} {
		if got, err := mintFrom(c.supervoxels, c.segments); err != nil || got != c.want {
			t.Errorf("beside %d and %d: %d, %v; want %d", c.supervoxels, c.segments, got, err, c.want)
		}
	}
}

// TestSorterSorts in memory and through files alike, as often as it is read.
func TestSorterSorts(t *testing.T) {
	for _, most := range []int{1, 7, 100, 1000} {
		rng := rand.New(rand.NewPCG(uint64(most), 3))
		s := newSorter(t.TempDir(), seenIDs)
		s.most = most
		var want []seenID
		for k := range 500 {
			x := seenID{rng.Uint64() >> rng.IntN(64), int64(k)}
			want = append(want, x)
			if err := s.add(x); err != nil {
				t.Fatal(err)
			}
		}
		slices.SortFunc(want, func(x, y seenID) int { return cmp.Or(cmp.Compare(x.id, y.id), cmp.Compare(x.line, y.line)) })
		for range 2 {
			m, err := s.sorted()
			if err != nil {
				t.Fatal(err)
			}
			var got []seenID
			for {
				var x seenID
				ok, err := m.next(&x)
				if err != nil {
					t.Fatal(err)
				}
				if !ok {
					break
				}
				got = append(got, x)
			}
			m.close()
			if !slices.Equal(got, want) {
				t.Errorf("holding %d at once: not sorted", most)
			}
		}
		s.drop()
	}
}

// TestRecordsComeBack: every kind of record leaves a file as it went in.
func TestRecordsComeBack(t *testing.T) {
	comesBack(t, contactRecords, contactRecord{1, math.MaxUint32, 0.1, 1e9, math.MaxInt64})
	comesBack(t, treeEdgeRecords, treeEdge{255, math.MaxUint64, 1, math.MaxUint32})
	comesBack(t, halfRecords, halfRecord{math.MaxUint32, 1, 255, 7, true})
	comesBack(t, seenIDs, seenID{math.MaxUint64, 1 << 40})
	comesBack(t, synapseRecords, synapseRecord{math.MaxUint64, 1, math.MaxUint32, [3]int32{-1, math.MinInt32, math.MaxInt32}, 0.3, 999})
}

func comesBack[T comparable](t *testing.T, r record[T], x T) {
	t.Helper()
	b := make([]byte, r.size)
	var y T
	r.put(b, &x)
	if r.get(b, &y); x != y {
		t.Errorf("%+v comes back as %+v", x, y)
	}
}

// TestIndexFinds every id and nothing else, for ids that are spread, packed, or differ only in their high bits.
func TestIndexFinds(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	for _, n := range []int{0, 1, 2, 3, 100, 5000} {
		for name, id := range map[string]func(k int) uint64{
			"spread": func(int) uint64 { return rng.Uint64() },
			"packed": func(k int) uint64 { return uint64(k) },
			"high":   func(k int) uint64 { return uint64(k) << 48 },
		} {
			ids := make([]uint64, n)
			for k := range ids {
				ids[k] = id(k)
			}
			x := newIDIndex(ids)
			for k, id := range ids {
				if at, ok := x.find(id); !ok || at != uint32(k) {
					t.Fatalf("%s: id %d of %d is found at %d, %v", name, k, n, at, ok)
				}
			}
			if _, ok := x.find(math.MaxUint64 - 12345); ok {
				t.Errorf("%s: a stranger is found", name)
			}
		}
	}
}

// TestCodesAreNear: affinities within 1/256 of what was delivered, at the ends within 1.5/256; areas within 5 %.
func TestCodesAreNear(t *testing.T) {
	for p := 0.0; p <= 1; p += 1.0 / 4096 {
		within := 0.5 / 256
		if p < 1./256 || p == 1 {
			within = 1.5 / 256
		}
		if got := affinityOf(affinityCode(p)); math.Abs(got-p) > within || affinityCode(p) == assumedCode {
			t.Errorf("affinity %g comes back as %g", p, got)
		}
	}
	for area := 1.0; area < 3e9; area *= 1.001 {
		if got := areas[areaCode(area)]; math.Abs(got-area) > 0.05*area {
			t.Errorf("area %g comes back as %g", area, got)
		}
	}
	if areaCode(0) != 0 || areas[0] != 0 || areaCode(0.01) != 1 || areaCode(1e30) != 255 {
		t.Error("no area is code 0, and the ends hold")
	}
}

// TestCacheKeepsTheLatest: never more bytes than it may hold, and what was used last stays.
func TestCacheKeepsTheLatest(t *testing.T) {
	c := newCache(100)
	for n := range 10 {
		c.put(blockKey{sectionGeometry, n}, &geometry{}, 30)
		if c.get(blockKey{sectionGeometry, 0}) == nil {
			t.Errorf("block 0 was looked at each time and is gone after block %d", n)
		}
		if c.bytes > 100 {
			t.Errorf("it holds %d bytes", c.bytes)
		}
	}
	if c.get(blockKey{sectionGeometry, 1}) != nil || c.get(blockKey{sectionGeometry, 9}) == nil || c.get(blockKey{sectionAccepted, 9}) != nil {
		t.Error("it keeps the wrong blocks")
	}
	c.put(blockKey{sectionGeometry, 99}, &geometry{}, 1000)
	if c.bytes != 0 {
		t.Errorf("a block that is too large leaves %d bytes", c.bytes)
	}
}
