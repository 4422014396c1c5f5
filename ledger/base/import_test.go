package base_test

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"testing"

	gocmp "github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"github.com/jackc/pgx/v5/pgxpool"
	"pgregory.net/rapid"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/ledger/base"
)

const tiny = "../../testdata/deliveries/tiny"

func importInto(t testing.TB, pool *pgxpool.Pool, dir string, name string) (*base.Base, *base.Report) {
	t.Helper()
	report, err := base.Import(t.Context(), pool, dir, base.ImportOptions{Name: name, TempDir: t.TempDir()})
	if err != nil {
		t.Fatal(err)
	}
	b, err := base.Open(t.Context(), pool, report.Info.VolumeID)
	if err != nil {
		t.Fatal(err)
	}
	if diff := gocmp.Diff(report.Info, b.Info()); diff != "" {
		t.Errorf("what was reported and what was stored differ (-reported +stored):\n%s", diff)
	}
	return b, report
}

// TestTinyComesBack reads the hand-made delivery and compares with what its README draws.
func TestTinyComesBack(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	b, report := importInto(t, pool, tiny, "")

	want := base.Info{
		VolumeID: report.Info.VolumeID, Name: "tiny", VoxelNM: [3]float64{8, 8, 40},
		Bounds: base.Bounds{Max: base.Point{6000, 6000, 4000}}, Seams: []base.Seam{{Axis: 2, AtNM: 2000}}, Gaps: []base.Gap{{Axis: 2, FromNM: 3200, ToNM: 3240}},
		Supervoxels: 22, Segments: 5, Contacts: 19, Rejected: 3, Assumed: 1, Synapses: 7, Nuclei: 3, Truth: 21, HasTruth: true,
		Digest: tinyDigest, MintFrom: 1 << 32, Layout: 1,
	}
	if diff := gocmp.Diff(want, report.Info); diff != "" {
		t.Errorf("info (-want +got):\n%s", diff)
	}
	if want := []string{"1 base segment is not held together by its contacts, the first is 400; 1 link to the nearest pieces was assumed"}; !slices.Equal(report.Warnings, want) {
		t.Errorf("warnings %q, want %q", report.Warnings, want)
	}

	n, ok := b.FindSegment(9223372036854775809)
	if !ok {
		t.Fatal("the falsely merged segment is not found")
	}
	seg := b.Segment(n)
	wantTotals := base.Totals{
		Supervoxels: 13, Voxels: 1889000, SynapsesIn: 4, SynapsesOut: 5, Nuclei: 2,
		Min: base.Point{1000, 1000, 1000}, Max: base.Point{4000, 3400, 1160},
	}
	if seg.Totals != wantTotals || seg.ID != 9223372036854775809 {
		t.Errorf("segment %d holds %+v, want %+v", seg.ID, seg.Totals, wantTotals)
	}

	// The second cell hangs on the tree by the weakest contact, so it is one range of ordinals.
	var second []uint32
	for _, id := range []base.ID{9223372036854775808, 22, 23, 24, 25, 26} {
		g, ok := b.Ordinal(id)
		if !ok {
			t.Fatalf("supervoxel %d is not found", id)
		}
		second = append(second, g)
	}
	r := base.Range{Lo: slices.Min(second), Hi: slices.Max(second) + 1}
	if r.Len() != len(second) {
		t.Fatalf("the second cell's ordinals are %v, not one range", second)
	}
	v, err := b.View(t.Context(), pool, []base.Range{r})
	if err != nil {
		t.Fatal(err)
	}
	if len(v.Contacts) != 5 || len(v.Outside) != 2 || len(v.Nuclei) != 1 || len(v.Synapses) != 4 {
		t.Errorf("the second cell has %d contacts, %d to outside, %d nuclei, %d synapses", len(v.Contacts), len(v.Outside), len(v.Nuclei), len(v.Synapses))
	}
	for _, o := range v.Outside {
		switch o.OtherID {
		case 17:
			if !o.Accepted || math.Abs(o.Affinity-0.55) > 1./512 || math.Abs(o.Area-9000) > 450 {
				t.Errorf("the false merge reads %+v", o)
			}
		case math.MaxUint64:
			if o.Accepted || o.Assumed {
				t.Errorf("the contact to the orphan reads %+v", o)
			}
		default:
			t.Errorf("a contact to %d", o.OtherID)
		}
	}
}

// tinyDigest is frozen: when it changes, bases that were imported before no longer match their deliveries, and the
// layout version must go up.
const tinyDigest = "d522d964df6e589cf5d444175e8bcc4fe781b8ed11158ebfae6c7cec79265ac6"

// TestSameRowsSameBase: neither the order of the rows nor the format leaves a trace.
func TestSameRowsSameBase(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	rng := rand.New(rand.NewPCG(1, 2))
	d := invent(rng, 5000) // two blocks
	first, _ := importInto(t, pool, d.write(t, ".csv"), "csv")
	for _, ending := range []string{".csv.gz", ".parquet"} {
		again, _ := importInto(t, pool, d.shuffled(rng).write(t, ending), ending[1:])
		if first.Info().Digest != again.Info().Digest {
			t.Errorf("%s in another order: digest %s, want %s", ending, again.Info().Digest, first.Info().Digest)
		}
		for _, sv := range d.supervoxels {
			g, _ := first.Ordinal(base.ID(sv.ID))
			if h, ok := again.Ordinal(base.ID(sv.ID)); !ok || g != h {
				t.Fatalf("%s: supervoxel %d has ordinal %d, want %d", ending, sv.ID, h, g)
			}
		}
	}
	d.contacts[17].Affinity = math.Mod(d.contacts[17].Affinity+0.5, 1)
	other, _ := importInto(t, pool, d.write(t, ".parquet"), "other")
	if first.Info().Digest == other.Info().Digest {
		t.Error("another affinity has the same digest")
	}
}

// TestViewsHoldWhatWasDelivered compares views, totals, nearest supervoxels and truth of random small deliveries with
// what the rows say.
func TestViewsHoldWhatWasDelivered(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	round := 0
	rapid.Check(t, func(rt *rapid.T) {
		round++
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(rt, "seed"), 1))
		d := invent(rng, rapid.SampledFrom([]int{1, 2, 40, 300}).Draw(rt, "supervoxels"))
		ending := rapid.SampledFrom([]string{".csv", ".csv.gz", ".parquet"}).Draw(rt, "ending")
		b, _ := importInto(t, pool, d.write(t, ending), fmt.Sprint("v", round))
		newOracle(rt, t.Context(), pool, d, b).check(rng)
	})
}

// TestViewsReachOverBlocks does the same with a delivery of three blocks, where contacts leave their block.
func TestViewsReachOverBlocks(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	rng := rand.New(rand.NewPCG(7, 7))
	d := invent(rng, 9000)
	b, _ := importInto(t, pool, d.write(t, ".csv"), "")
	newOracle(t, t.Context(), pool, d, b).check(rng)
}

// someRanges are ascending and do not overlap; they may be none.
func someRanges(rng *rand.Rand, n int) []base.Range {
	var marks []uint32
	for range rng.IntN(12) {
		marks = append(marks, uint32(rng.IntN(n+1)))
	}
	slices.Sort(marks)
	marks = slices.Compact(marks)
	out := []base.Range{}
	for k := 1; k < len(marks); k += 2 {
		out = append(out, base.Range{Lo: marks[k-1], Hi: marks[k]})
	}
	return out
}

// oracle knows a delivery by ordinals and answers by looking at every row.
type oracle struct {
	d    *delivery
	b    *base.Base
	at   []int             // row of an ordinal
	of   map[uint64]uint32 // ordinal of an id
	t    rapid.TB
	ctx  context.Context
	pool *pgxpool.Pool
}

func newOracle(t rapid.TB, ctx context.Context, pool *pgxpool.Pool, d *delivery, b *base.Base) *oracle {
	o := &oracle{d: d, b: b, at: make([]int, len(d.supervoxels)), of: make(map[uint64]uint32), t: t, ctx: ctx, pool: pool}
	taken := make([]bool, len(d.supervoxels))
	for i, sv := range d.supervoxels {
		g, ok := b.Ordinal(base.ID(sv.ID))
		if !ok || taken[g] {
			t.Fatalf("supervoxel %d: ordinal %d, found %v", sv.ID, g, ok)
		}
		taken[g], o.at[g], o.of[sv.ID] = true, i, g
	}
	if _, ok := b.Ordinal(0); ok {
		t.Fatal("there is a supervoxel 0")
	}
	return o
}

func (o *oracle) check(rng *rand.Rand) {
	o.checkOrder()
	for range 4 {
		ranges := someRanges(rng, len(o.at))
		v := o.expected(ranges)
		o.checkView(ranges, v)
		o.checkTotals(ranges, v)
		o.checkNearest(rng, ranges, v)
	}
	o.checkNearest(rng, nil, o.expected([]base.Range{{Lo: 0, Hi: uint32(len(o.at))}}))
	o.checkTruth()
}

// checkOrder: base segments are ranges, in the order of their numbers, and each hangs together.
func (o *oracle) checkOrder() {
	next := uint32(0)
	for n := range o.b.SegmentCount() {
		s := o.b.Segment(n)
		if s.Lo != next || s.Hi <= s.Lo {
			o.t.Fatalf("segment %d covers [%d, %d) after %d", n, s.Lo, s.Hi, next)
		}
		next = s.Hi
		for g := s.Lo; g < s.Hi; g++ {
			if sv := o.d.supervoxels[o.at[g]]; base.ID(sv.Segment) != s.ID || o.b.SegmentNumber(g) != n {
				o.t.Fatalf("ordinal %d: segment %d, number %d; want %d, %d", g, sv.Segment, o.b.SegmentNumber(g), s.ID, n)
			}
		}
		if m, ok := o.b.FindSegment(s.ID); !ok || m != n {
			o.t.Fatalf("segment %d is found as number %d, want %d", s.ID, m, n)
		}
	}
	if next != uint32(len(o.d.supervoxels)) {
		o.t.Fatalf("segments cover %d ordinals of %d", next, len(o.d.supervoxels))
	}
}

// expected is the view of some ranges, with affinities and areas as delivered, and without assumed links.
func (o *oracle) expected(ranges []base.Range) *base.View {
	info := o.b.Info()
	v := &base.View{VoxelNM: info.VoxelNM, Bounds: info.Bounds, Seams: info.Seams, Gaps: info.Gaps}
	place := make(map[uint32]int32)
	for _, r := range ranges {
		for g := r.Lo; g < r.Hi; g++ {
			sv := o.d.supervoxels[o.at[g]]
			place[g] = int32(len(v.IDs))
			radius := math.Cbrt(float64(sv.Voxels) * 8 * 8 * 40 * 3 / 4 / math.Pi)
			if sv.Radius != nil {
				radius = math.Round(*sv.Radius)
			}
			v.Ordinals, v.IDs = append(v.Ordinals, g), append(v.IDs, base.ID(sv.ID))
			v.Points = append(v.Points, base.Point{sv.X, sv.Y, sv.Z})
			v.Voxels, v.Radius = append(v.Voxels, sv.Voxels), append(v.Radius, radius)
		}
	}
	for _, c := range o.d.contacts {
		a, b := min(o.of[c.A], o.of[c.B]), max(o.of[c.A], o.of[c.B])
		at, inA := place[a]
		to, inB := place[b]
		accepted := o.d.supervoxels[o.at[a]].Segment == o.d.supervoxels[o.at[b]].Segment
		area := 0.
		if c.Area != nil {
			area = *c.Area
		}
		switch {
		case inA && inB && accepted:
			v.Contacts = append(v.Contacts, base.Contact{A: at, B: to, Affinity: c.Affinity, Area: area})
		case inA && !inB:
			v.Outside = append(v.Outside, base.Outside{At: at, Other: b, OtherID: base.ID(o.d.supervoxels[o.at[b]].ID), Affinity: c.Affinity, Area: area, Accepted: accepted})
		case inB && !inA:
			v.Outside = append(v.Outside, base.Outside{At: to, Other: a, OtherID: base.ID(o.d.supervoxels[o.at[a]].ID), Affinity: c.Affinity, Area: area, Accepted: accepted})
		}
	}
	for _, s := range o.d.synapses {
		one := base.Synapse{ID: base.ID(s.ID), Point: base.Point{math.Round(s.X), math.Round(s.Y), math.Round(s.Z)}, Confidence: s.Confidence}
		if s.Transmitter != nil {
			one.Transmitter = *s.Transmitter
		}
		pre, post := o.of[s.Pre], o.of[s.Post]
		if at, ok := place[post]; ok {
			one.At, one.Out, one.Other = at, false, pre
			v.Synapses = append(v.Synapses, one)
		}
		if at, ok := place[pre]; ok {
			one.At, one.Out, one.Other = at, true, post
			v.Synapses = append(v.Synapses, one)
		}
	}
	for _, n := range o.d.nuclei {
		if at, ok := place[o.of[n.Supervoxel]]; ok {
			v.Nuclei = append(v.Nuclei, base.Nucleus{ID: base.ID(n.ID), At: at, Point: base.Point{math.Round(n.X), math.Round(n.Y), math.Round(n.Z)}, VolumeNM3: n.Volume})
		}
	}
	slices.SortFunc(v.Contacts, func(x, y base.Contact) int { return cmp.Or(cmp.Compare(x.A, y.A), cmp.Compare(x.B, y.B)) })
	slices.SortFunc(v.Outside, func(x, y base.Outside) int { return cmp.Or(cmp.Compare(x.At, y.At), cmp.Compare(x.Other, y.Other)) })
	slices.SortStableFunc(v.Synapses, func(x, y base.Synapse) int {
		side := map[bool]int{true: 1}
		return cmp.Or(cmp.Compare(x.At, y.At), side[x.Out]-side[y.Out], cmp.Compare(x.ID, y.ID))
	})
	slices.SortFunc(v.Nuclei, func(x, y base.Nucleus) int { return cmp.Or(cmp.Compare(x.At, y.At), cmp.Compare(x.ID, y.ID)) })
	return v
}

// settle takes a stored number for the delivered one where it is as near as it is kept.
func settle(got *float64, want, within float64) {
	if math.Abs(*got-want) <= within {
		*got = want
	}
}

func (o *oracle) checkView(ranges []base.Range, want *base.View) {
	got, err := o.b.View(o.ctx, o.pool, ranges)
	if err != nil {
		o.t.Fatal(err)
	}
	got.Contacts = slices.DeleteFunc(got.Contacts, func(c base.Contact) bool { return c.Assumed })
	got.Outside = slices.DeleteFunc(got.Outside, func(c base.Outside) bool { return c.Assumed })
	for i := range min(len(want.Contacts), len(got.Contacts)) {
		w, g := want.Contacts[i], &got.Contacts[i]
		settle(&g.Affinity, w.Affinity, 1.5/256)
		settle(&g.Area, w.Area, max(1, 0.05*w.Area))
	}
	for i := range min(len(want.Outside), len(got.Outside)) {
		w, g := want.Outside[i], &got.Outside[i]
		settle(&g.Affinity, w.Affinity, 1.5/256)
		settle(&g.Area, w.Area, max(1, 0.05*w.Area))
	}
	for i := range min(len(want.Radius), len(got.Radius)) {
		settle(&got.Radius[i], want.Radius[i], 1e-9*want.Radius[i])
	}
	same := got.VoxelNM == want.VoxelNM && got.Bounds == want.Bounds && slices.Equal(got.Seams, want.Seams) && slices.Equal(got.Gaps, want.Gaps) &&
		slices.Equal(got.Ordinals, want.Ordinals) && slices.Equal(got.IDs, want.IDs) && slices.Equal(got.Points, want.Points) &&
		slices.Equal(got.Voxels, want.Voxels) && slices.Equal(got.Radius, want.Radius) && slices.Equal(got.Contacts, want.Contacts) &&
		slices.Equal(got.Outside, want.Outside) && slices.Equal(got.Synapses, want.Synapses) && slices.Equal(got.Nuclei, want.Nuclei)
	if !same {
		o.t.Fatalf("view of %v (-want +got):\n%s", ranges, gocmp.Diff(want, got, cmpopts.EquateEmpty()))
	}
}

func (o *oracle) checkTotals(ranges []base.Range, v *base.View) {
	want := base.Totals{Supervoxels: int64(v.Len()), Nuclei: int64(len(v.Nuclei))}
	for i, p := range v.Points {
		want.Voxels += v.Voxels[i]
		if i == 0 {
			want.Min, want.Max = p, p
		}
		for axis := range p {
			want.Min[axis], want.Max[axis] = min(want.Min[axis], p[axis]), max(want.Max[axis], p[axis])
		}
	}
	for _, s := range v.Synapses {
		if s.Out {
			want.SynapsesOut++
		} else {
			want.SynapsesIn++
		}
	}
	got, err := o.b.Totals(o.ctx, o.pool, ranges)
	if err != nil || got != want {
		o.t.Fatalf("totals of %v: %+v, %v; want %+v", ranges, got, err, want)
	}
}

func (o *oracle) checkNearest(rng *rand.Rand, ranges []base.Range, v *base.View) {
	p := base.Point{float64(rng.IntN(14000) - 2000), 5000, float64(rng.IntN(10000))}
	g, distance, err := o.b.Nearest(o.ctx, o.pool, ranges, p)
	if v.Len() == 0 {
		if fault.KindOf(err) != fault.Invalid {
			o.t.Fatalf("nearest of nothing: %v", err)
		}
		return
	}
	best := 0
	for i, q := range v.Points {
		if q.Distance(p) < v.Points[best].Distance(p) {
			best = i
		}
	}
	if err != nil || g != v.Ordinals[best] || distance != v.Points[best].Distance(p) {
		o.t.Fatalf("nearest to %v: %d at %g, %v; want %d at %g", p, g, distance, err, v.Ordinals[best], v.Points[best].Distance(p))
	}
}

func (o *oracle) checkTruth() {
	neuron, has, voxels, err := o.b.Truth(o.ctx, o.pool)
	if err != nil {
		o.t.Fatal(err)
	}
	told := make(map[uint32]uint64)
	for _, row := range o.d.truth {
		told[o.of[row.Supervoxel]] = row.Neuron
	}
	for g, i := range o.at {
		want, is := told[uint32(g)]
		if has[g] != is || neuron[g] != base.ID(want) || voxels[g] != o.d.supervoxels[i].Voxels {
			o.t.Fatalf("truth of ordinal %d: %d, %v, %d voxels; want %d, %v", g, neuron[g], has[g], voxels[g], want, is)
		}
	}
}

// TestExtremeIDsComeBack: through every format, ids that a double, a signed number or a careless parser would change.
func TestExtremeIDsComeBack(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	extreme := []uint64{1, 1 << 32, 1<<53 - 1, 1 << 53, 1<<53 + 1, 1<<63 - 1, 1 << 63, 1<<63 + 1, math.MaxUint64 - 1, math.MaxUint64}
	d := &delivery{description: `{"name": "extreme", "voxel_nm": [8, 8, 8], "bounds_nm": {"min": [0, 0, 0], "max": [100, 100, 100]}}`}
	for i, id := range extreme {
		d.supervoxels = append(d.supervoxels, supervoxel{ID: id, Segment: id, Voxels: 1, X: float64(i)})
		d.synapses = append(d.synapses, synapse{ID: id, Pre: id, Post: id})
		d.nuclei = append(d.nuclei, nucleus{ID: id, Supervoxel: id})
		d.truth = append(d.truth, truth{id, id})
		if i > 0 {
			d.contacts = append(d.contacts, contact{A: extreme[i-1], B: id, Affinity: 0.1})
		}
	}
	for _, ending := range []string{".csv", ".csv.gz", ".parquet"} {
		b, report := importInto(t, pool, d.write(t, ending), "extreme"+ending)
		if len(report.Warnings) > 0 {
			t.Errorf("%s: warnings %q", ending, report.Warnings)
		}
		neuron, _, _, err := b.Truth(t.Context(), pool)
		if err != nil {
			t.Fatal(err)
		}
		for i, raw := range extreme {
			id := base.ID(raw)
			g, ok := b.Ordinal(id)
			if !ok {
				t.Fatalf("%s: %d is not found", ending, id)
			}
			v, err := b.View(t.Context(), pool, []base.Range{{Lo: g, Hi: g + 1}})
			if err != nil {
				t.Fatal(err)
			}
			if v.IDs[0] != id || v.Synapses[0].ID != id || v.Synapses[1].ID != id || v.Nuclei[0].ID != id || neuron[g] != id || b.Segment(b.SegmentNumber(g)).ID != id {
				t.Errorf("%s: %d comes back as %+v", ending, id, v)
			}
			if i > 0 && !slices.ContainsFunc(v.Outside, func(o base.Outside) bool { return o.OtherID == base.ID(extreme[i-1]) }) {
				t.Errorf("%s: %d lost its contact to %d", ending, id, extreme[i-1])
			}
		}
		if b.Info().MintFrom != 2<<32 {
			t.Errorf("ids are minted from %d; 2^32 was delivered", b.Info().MintFrom)
		}
	}
}

// TestImportOfReconstructedNeurons imports a delivery made of real neurons, where one lies beside the project.
// FETTLE_DELIVERIES names another folder that holds some.
func TestImportOfReconstructedNeurons(t *testing.T) {
	t.Parallel()
	folder := cmp.Or(os.Getenv("FETTLE_DELIVERIES"), "../../../shared/deliveries")
	dir := filepath.Join(folder, "small")
	if _, err := os.Stat(dir); errors.Is(err, os.ErrNotExist) {
		t.Logf("there is no %s, so nothing is imported", dir)
		return
	}
	pool := pgtest.New(t)
	b, report := importInto(t, pool, dir, "")
	if i := report.Info; i.Supervoxels != 30251 || i.Contacts != 76682 || i.Synapses != 4741 || i.Nuclei != 40 || i.Truth != 30251 {
		t.Errorf("counts %+v", i)
	}
	if len(report.Warnings) > 0 {
		t.Errorf("warnings %q", report.Warnings)
	}
	all := []base.Range{{Lo: 0, Hi: uint32(report.Info.Supervoxels)}}
	v, err := b.View(t.Context(), pool, all)
	if err != nil {
		t.Fatal(err)
	}
	if int64(len(v.Contacts)) != report.Info.Contacts-report.Info.Rejected || int64(len(v.Synapses)) != 2*report.Info.Synapses || len(v.Outside) != 0 {
		t.Errorf("%d contacts, %d synapse sides, %d outside", len(v.Contacts), len(v.Synapses), len(v.Outside))
	}
}

// TestNameTaken: a volume is never imported over another.
func TestNameTaken(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	importInto(t, pool, tiny, "")
	_, err := base.Import(t.Context(), pool, tiny, base.ImportOptions{})
	if !errors.Is(err, fault.New(fault.Conflict, "volume-exists", "")) {
		t.Errorf("importing twice: %v", err)
	}
	importInto(t, pool, tiny, "tiny-2")
	if _, err := base.Open(t.Context(), pool, 4711); fault.KindOf(err) != fault.NotFound {
		t.Errorf("opening what is not there: %v", err)
	}
}
