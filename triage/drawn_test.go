package triage

import (
	"slices"
	"testing"

	"fettle.example/fettle/internal/stats"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/ledger/cut"
)

// drawing makes a segment by hand: neurites as strings of supervoxels, and contacts between them.
type drawing struct {
	v base.View
}

// step is the distance of two supervoxels of a drawn neurite, nm.
const step = 300.0

// neurite draws n supervoxels from a point in a direction, each in firm contact with the one before, and returns their indexes.
func (d *drawing) neurite(n int, from, towards base.Point, radius float64) []int32 {
	var out []int32
	for k := range n {
		p := from
		for i := range p {
			p[i] += float64(k) * step * towards[i]
		}
		i := int32(len(d.v.IDs))
		d.v.Ordinals, d.v.IDs = append(d.v.Ordinals, uint32(i)), append(d.v.IDs, base.ID(1000+i))
		d.v.Points, d.v.Voxels, d.v.Radius = append(d.v.Points, p), append(d.v.Voxels, 1000), append(d.v.Radius, radius)
		if k > 0 {
			d.touch(out[k-1], i, 0.98)
		}
		out = append(out, i)
	}
	return out
}

func (d *drawing) touch(a, b int32, affinity float64) {
	d.v.Contacts = append(d.v.Contacts, base.Contact{A: min(a, b), B: max(a, b), Affinity: affinity})
}

// synapses puts n synapses on each of some supervoxels.
func (d *drawing) synapses(on []int32, n int, out bool) {
	for _, i := range on {
		for range n {
			d.v.Synapses = append(d.v.Synapses, base.Synapse{ID: base.ID(len(d.v.Synapses) + 1), At: i, Out: out, Confidence: 0.9})
		}
	}
}

func (d *drawing) nucleus(at int32) {
	d.v.Nuclei = append(d.v.Nuclei, base.Nucleus{ID: base.ID(at), At: at, Point: d.v.Points[at], VolumeNM3: 1e11})
}

func (d *drawing) done() *Case {
	slices.SortFunc(d.v.Contacts, func(x, y base.Contact) int {
		if x.A != y.A {
			return int(x.A - y.A)
		}
		return int(x.B - y.B)
	})
	d.v.Segment = 77
	return NewCase(&d.v, stats.Robust{}, false)
}

func named(fs []Finding, detector string) []Finding {
	return slices.DeleteFunc(slices.Clone(fs), func(f Finding) bool { return f.Detector != detector })
}

// parts checks that the proposed split parts two sets of supervoxels exactly.
func parts(t *testing.T, c *Case, p *Proposal, one, two []int32) {
	t.Helper()
	if p == nil || p.Kind != ProposeSplit {
		t.Fatalf("no split is proposed: %+v", p)
	}
	local := func(ids []ledger.ID) (out []int32) {
		for _, id := range ids {
			out = append(out, int32(id-1000))
		}
		return out
	}
	r, err := cut.Min(c.Len(), c.edges, local(p.Groups[0]), local(p.Groups[1]))
	if err != nil {
		t.Fatal(err)
	}
	for _, side := range [][]int32{one, two} {
		for _, i := range side {
			if slices.Contains(r.Side, i) != slices.Contains(r.Side, side[0]) {
				t.Fatalf("the proposal cuts through a neurite: its side is %v", r.Side)
			}
		}
	}
	if slices.Contains(r.Side, one[0]) == slices.Contains(r.Side, two[0]) {
		t.Fatal("the proposal leaves the two together")
	}
}

// crossed are two neurites that touch in passing: one contact was taken for the inside of a cell, the others not.
func crossed() (d *drawing, one, two []int32) {
	d = new(drawing)
	one = d.neurite(31, base.Point{-15 * step, 0, 0}, base.Point{1, 0, 0}, 100)
	two = d.neurite(31, base.Point{0, -15 * step, 200}, base.Point{0, 1, 0}, 100)
	d.touch(one[15], two[15], 0.6)
	d.touch(one[14], two[15], 0.02)
	d.touch(one[16], two[15], 0.01)
	d.touch(one[15], two[14], 0.02)
	return d, one, two
}

func TestTwoNeuritesThatTouchInPassing(t *testing.T) {
	d, one, two := crossed()
	c := d.done()
	fs := Judge(c)
	for _, detector := range []string{"weak-bridge", "crossing"} {
		found := named(fs, detector)
		if len(found) == 0 {
			t.Errorf("%s says nothing", detector)
			continue
		}
		f := found[0]
		if f.Probability < 0.5 || f.Key != "1015-1046" || f.Point.Distance(base.Point{0, 0, 100}) > 2*step {
			t.Errorf("%s: %+v", detector, f)
		}
		parts(t, c, f.Proposal, one, two)
	}
	places := Group(fs)
	if len(places) != 1 || len(places[0].Findings) < 2 {
		t.Errorf("findings about one place make %d places", len(places))
	}
}

func TestAPlainNeuriteIsNotSuspicious(t *testing.T) {
	d := new(drawing)
	trunk := d.neurite(40, base.Point{}, base.Point{1, 0, 0}, 150)
	branch := d.neurite(20, base.Point{20 * step, step, 0}, base.Point{0.7, 0.7, 0}, 100)
	d.touch(trunk[20], branch[0], 0.97)
	d.synapses(trunk[30:], 2, true)
	d.synapses(branch, 1, false)
	d.nucleus(trunk[0])
	if fs := Judge(d.done()); len(fs) > 0 {
		t.Errorf("%+v", fs)
	}
}

func TestAnAxonGluedToADendrite(t *testing.T) {
	d, one, two := crossed()
	d.synapses(one[:8], 2, false)
	d.synapses(two[20:28], 2, true)
	c := d.done()
	fs := named(Judge(c), "polarity-conflict")
	if len(fs) == 0 {
		t.Fatal("nothing is said about inputs here and outputs there")
	}
	parts(t, c, fs[0].Proposal, one, two)
	if fs[0].Gain < 8 {
		t.Errorf("16 synapses would move, and the gain is %v", fs[0].Gain)
	}
}

func TestSeveralNuclei(t *testing.T) {
	d, one, two := crossed()
	d.nucleus(one[2])
	d.nucleus(two[28])
	c := d.done()
	fs := named(Judge(c), "several-nuclei")
	if len(fs) != 1 || fs[0].Probability < 0.8 {
		t.Fatalf("%+v", fs)
	}
	parts(t, c, fs[0].Proposal, one, two)
}

func TestASegmentOfOutlyingSize(t *testing.T) {
	d, one, two := crossed()
	c := d.done()
	c.Sizes, c.SizesOK = stats.Robust{Median: 5, Unit: 1, N: 100}, true // ln voxels; the drawing has ln 62000 = 11
	fs := named(Judge(c), "size-outlier")
	if len(fs) != 1 {
		t.Fatalf("%+v", fs)
	}
	parts(t, c, fs[0].Proposal, one, two)
	c.Sizes.Median = 9
	if fs := named(Judge(c), "size-outlier"); len(fs) != 0 {
		t.Errorf("a usual size: %+v", fs)
	}
}

func TestABranchThatTurnsBackAndOneThatIsTooThick(t *testing.T) {
	d := new(drawing)
	trunk := d.neurite(40, base.Point{}, base.Point{1, 0, 0}, 120)
	d.nucleus(trunk[0])
	back := d.neurite(15, base.Point{20*step - step, step, 0}, base.Point{-0.9, 0.3, 0}, 100)
	d.touch(trunk[20], back[0], 0.55)
	thick := d.neurite(15, base.Point{30 * step, -step, 0}, base.Point{0.7, -0.7, 0}, 300)
	d.touch(trunk[30], thick[0], 0.55)
	c := d.done()
	fs := Judge(c)
	if found := named(fs, "turning-back"); len(found) != 1 || found[0].Key != "1020-1040" {
		t.Errorf("turning back: %+v", found)
	}
	if found := named(fs, "thick-daughter"); len(found) != 1 || found[0].Key != "1030-1055" {
		t.Errorf("too thick: %+v", found)
	}
}

// fragment is a neurite that ends in front of another segment.
func fragment(affinity float64) *Case {
	d := new(drawing)
	f := d.neurite(12, base.Point{}, base.Point{1, 0, 0}, 100)
	d.v.Outside = append(d.v.Outside, base.Outside{At: f[11], Other: 500, OtherID: 2000, OtherSegment: 88, Affinity: affinity})
	d.v.Seams = []base.Seam{{Axis: 0, AtNM: 11.5 * step}}
	c := d.done()
	c.Other = func(id ledger.ID) (ledger.Segment, bool) {
		s := ledger.Segment{ID: id}
		s.Supervoxels, s.SynapsesIn = 900, 400
		return s, id == 88
	}
	c.Place = func(uint32) (base.Point, bool) { return base.Point{12 * step, 20, 0}, true }
	return c
}

func TestATipInFrontOfAnotherSegment(t *testing.T) {
	fs := Judge(fragment(0.3))
	tip, contact := named(fs, "facing-tip"), named(fs, "strong-contact")
	if len(tip) != 1 || len(contact) != 1 {
		t.Fatalf("%+v", fs)
	}
	p := tip[0].Proposal
	if p.Kind != ProposeMerge || p.A != 1011 || p.B != 2000 || !slices.Equal(tip[0].Segments, []ledger.ID{77, 88}) {
		t.Errorf("%+v", tip[0])
	}
	if tip[0].Probability <= contact[0].Probability {
		t.Errorf("a tip at a seam says more than its contact: %v, %v", tip[0].Probability, contact[0].Probability)
	}
	if places := Group(fs); len(places) != 1 || places[0].Minutes <= 0 || places[0].Priority != places[0].Gain/places[0].Minutes {
		t.Errorf("%+v", places)
	}
}

func TestTwoCellsWithANucleusEachAreHardlyOne(t *testing.T) {
	c := fragment(0.3)
	one := Judge(c)[0].Probability
	c.Nuclei = append(c.Nuclei, base.Nucleus{ID: 1, At: 0})
	c.Other = func(id ledger.ID) (ledger.Segment, bool) {
		s := ledger.Segment{ID: id}
		s.Supervoxels, s.Nuclei = 900, 1
		return s, true
	}
	for _, f := range Judge(c) {
		if f.Probability > one/5 {
			t.Errorf("%+v", f)
		}
	}
}

func TestAPersonsCutIsNotProposedAgain(t *testing.T) {
	c := fragment(0.3)
	c.Outside[0].Accepted = true // the base had it; somebody's split cut it
	if fs := Judge(c); len(fs) != 0 {
		t.Errorf("%+v", fs)
	}
}
