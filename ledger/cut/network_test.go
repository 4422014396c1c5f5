package cut

import (
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/google/go-cmp/cmp"
	"gonum.org/v1/gonum/graph/network"
	"gonum.org/v1/gonum/graph/simple"
	"pgregory.net/rapid"

	"fettle.example/fettle/internal/fault"
)

// question is one minimum cut to find.
type question struct {
	n             int
	edges         []Edge
	first, second []int32
}

// drawQuestion draws small graphs with few distinct capacities, so that ties
// between cuts are common.
func drawQuestion(t *rapid.T, most int) question {
	n := rapid.IntRange(2, most).Draw(t, "n")
	vertex := rapid.Int32Range(0, int32(n-1))
	edge := rapid.Custom(func(t *rapid.T) Edge {
		return Edge{vertex.Draw(t, "a"), vertex.Draw(t, "b"), rapid.Int64Range(1, 5).Draw(t, "c")}
	})
	q := question{n: n, edges: rapid.SliceOfN(edge, 0, 3*n).Draw(t, "edges")}
	order := rapid.Permutation(sequence(n)).Draw(t, "order")
	k := rapid.IntRange(1, n-1).Draw(t, "first")
	k = min(k, 3)
	q.first = order[:k]
	q.second = order[k : k+rapid.IntRange(1, min(3, n-k)).Draw(t, "second")]
	return q
}

func sequence(n int) []int32 {
	s := make([]int32, n)
	for i := range s {
		s[i] = int32(i)
	}
	return s
}

func ask(t interface{ Fatalf(string, ...any) }, q question) Result {
	r, err := Min(q.n, q.edges, q.first, q.second)
	if err != nil {
		t.Fatalf("Min(%+v): %v", q, err)
	}
	return r
}

func TestMinAgainstExhaustion(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		q := drawQuestion(t, 10)
		want := byExhaustion(q.n, q.edges, q.first, q.second)
		if diff := cmp.Diff(want, ask(t, q)); diff != "" {
			t.Fatalf("%+v (-want +got):\n%s", q, diff)
		}
	})
}

// The forest takes over only after many paths, which small graphs do not have.
// Here it gets all the work from the beginning.
func TestForestAgainstExhaustion(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		q := drawQuestion(t, 10)
		want := byExhaustion(q.n, q.edges, q.first, q.second)
		w, err := NewNetwork(q.n, q.edges)
		if err != nil {
			t.Fatal(err)
		}
		for range 2 { // twice, as its state is kept
			w.clear()
			if got := w.growForest(q.first, q.second); got != want.Flow {
				t.Fatalf("%+v: flow %d, want %d", q, got, want.Flow)
			}
			w.begin(q.first, q.second)
			if m, met := w.search(); met {
				t.Fatalf("%+v: a path is left through %+v", q, m)
			}
		}
	})
}

// gridQuestion is a slab of side x side x 4 vertices: its cuts are wide, so
// both methods work.
func gridQuestion(rng *rand.Rand, side int) question {
	const depth = 4
	at := func(x, y, z int) int32 { return int32((z*side+y)*side + x) }
	q := question{n: side * side * depth}
	for z := range depth {
		for y := range side {
			for x := range side {
				for _, to := range [][3]int{{x + 1, y, z}, {x, y + 1, z}, {x, y, z + 1}} {
					if to[0] < side && to[1] < side && to[2] < depth {
						q.edges = append(q.edges, Edge{at(x, y, z), at(to[0], to[1], to[2]), 1 + rng.Int64N(20)})
					}
				}
			}
		}
	}
	for z := range depth {
		for y := range side {
			q.first = append(q.first, at(0, y, z))
			q.second = append(q.second, at(side-1, y, z))
		}
	}
	return q
}

func shuffled(rng *rand.Rand, q question) (question, []int) {
	perm := rng.Perm(len(q.edges))
	s := question{n: q.n, edges: make([]Edge, len(q.edges)), first: slices.Clone(q.first), second: slices.Clone(q.second)}
	for to, from := range perm {
		e := q.edges[from]
		if rng.IntN(2) == 0 {
			e.A, e.B = e.B, e.A
		}
		s.edges[to] = e
	}
	rng.Shuffle(len(s.first), func(i, j int) { s.first[i], s.first[j] = s.first[j], s.first[i] })
	rng.Shuffle(len(s.second), func(i, j int) { s.second[i], s.second[j] = s.second[j], s.second[i] })
	return s, perm
}

func TestWideCutsAgainstEdmondsKarpAndShuffled(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for trial := range 60 {
		q := gridQuestion(rng, 4+trial%9)
		got := ask(t, q)
		plain := newPlainNetwork(q.n, q.edges, q.first, q.second)
		flow := plain.edmondsKarp()
		if other := newPlainNetwork(q.n, q.edges, q.first, q.second).dinic(); other != flow {
			t.Fatalf("the two references disagree: %d and %d", flow, other)
		}
		s, sink := plain.leastSides()
		if diff := cmp.Diff(canonical(q.n, q.edges, flow, s, sink), got); diff != "" {
			t.Fatalf("trial %d (-want +got):\n%s", trial, diff)
		}
		other, perm := shuffled(rng, q)
		again := ask(t, other)
		for i, e := range again.Cut {
			again.Cut[i] = perm[e]
		}
		slices.Sort(again.Cut)
		if diff := cmp.Diff(got, again); diff != "" {
			t.Fatalf("trial %d: another order, another answer (-first +then):\n%s", trial, diff)
		}
	}
}

// The value of the flow by an independent library.
func TestFlowAgainstGonum(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		q := drawQuestion(t, 30)
		if got, want := ask(t, q).Flow, gonumFlow(q); got != want {
			t.Fatalf("%+v: flow %d, want %d", q, got, want)
		}
	})
}

func gonumFlow(q question) int64 {
	g := simple.NewWeightedDirectedGraph(0, 0)
	for v := range q.n + 2 {
		g.AddNode(simple.Node(v))
	}
	add := func(a, b int, c float64) {
		if a == b {
			return
		}
		if before, ok := g.Weight(int64(a), int64(b)); ok {
			c += before
		}
		g.SetWeightedEdge(g.NewWeightedEdge(simple.Node(a), simple.Node(b), c))
	}
	for _, e := range q.edges {
		add(int(e.A), int(e.B), float64(e.Capacity))
		add(int(e.B), int(e.A), float64(e.Capacity))
	}
	for _, v := range q.first {
		add(q.n, int(v), 1e9)
	}
	for _, v := range q.second {
		add(int(v), q.n+1, 1e9)
	}
	return int64(network.MaxFlowDinic(g, simple.Node(q.n), simple.Node(q.n+1), 0.5))
}

// One network answers many questions, and none hears of another.
func TestNetworkIsReusable(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	q := gridQuestion(rng, 8)
	w, err := NewNetwork(q.n, q.edges)
	if err != nil {
		t.Fatal(err)
	}
	for trial := range 200 {
		perm := rng.Perm(q.n)
		k := 1 + rng.IntN(20)
		q.first, q.second = nil, nil
		for _, v := range perm[:k] {
			q.first = append(q.first, int32(v))
		}
		for _, v := range perm[k : 2*k] {
			q.second = append(q.second, int32(v))
		}
		got, err := w.Cut(q.first, q.second)
		if err != nil {
			t.Fatal(err)
		}
		want := ask(t, q)
		want.Ambiguous = -1
		if diff := cmp.Diff(want, got); diff != "" {
			t.Fatalf("trial %d (-fresh +reused):\n%s", trial, diff)
		}
	}
}

func TestSizesDecideWhichSideIsSmaller(t *testing.T) {
	// 0-1-2-3, weakest in the middle of 1-2; vertex 0 stands for nine.
	edges := []Edge{{0, 1, 5}, {1, 2, 1}, {2, 3, 5}}
	w, err := NewNetwork(4, edges)
	if err != nil {
		t.Fatal(err)
	}
	for _, step := range []struct {
		size  []int64
		side  []int32
		first bool
	}{
		{nil, []int32{0, 1}, true}, // a tie goes to the first group
		{[]int64{9, 1, 1, 1}, []int32{2, 3}, false},
		{[]int64{1, 1, 1, 9}, []int32{0, 1}, true},
		{nil, []int32{0, 1}, true},
	} {
		if err := w.SetSizes(step.size); err != nil {
			t.Fatal(err)
		}
		r, err := w.Cut([]int32{0}, []int32{3})
		if err != nil || !slices.Equal(r.Side, step.side) || r.FirstGroup != step.first {
			t.Errorf("sizes %v: side %v of the first group %v, %v", step.size, r.Side, r.FirstGroup, err)
		}
	}
	for _, bad := range [][]int64{{1}, {1, 1, 0, 1}} {
		if err := w.SetSizes(bad); fault.KindOf(err) != fault.Invalid {
			t.Errorf("sizes %v: %v", bad, err)
		}
	}
}

func TestRefusals(t *testing.T) {
	edges := []Edge{{0, 1, 1}, {1, 2, 1}}
	for _, c := range []struct {
		name, code    string
		n             int
		edges         []Edge
		first, second []int32
	}{
		{"same vertex", "vertex-in-both-groups", 3, edges, []int32{0, 1}, []int32{2, 1}},
		{"empty first", "group-empty", 3, edges, nil, []int32{2}},
		{"empty second", "group-empty", 3, edges, []int32{2}, []int32{}},
		{"vertex too large", "vertex-out-of-range", 3, edges, []int32{0}, []int32{3}},
		{"vertex negative", "vertex-out-of-range", 3, edges, []int32{-1}, []int32{2}},
		{"edge end too large", "vertex-out-of-range", 2, edges, []int32{0}, []int32{1}},
		{"no capacity", "capacity-out-of-range", 3, []Edge{{0, 1, 0}}, []int32{0}, []int32{1}},
		{"negative capacity", "capacity-out-of-range", 3, []Edge{{0, 1, -4}}, []int32{0}, []int32{1}},
		{"overflow", "capacity-out-of-range", 3, []Edge{{0, 1, maxTotal}, {0, 1, 1}}, []int32{0}, []int32{1}},
		{"negative n", "graph-too-large", -1, nil, []int32{0}, []int32{1}},
	} {
		_, err := Min(c.n, c.edges, c.first, c.second)
		f, ok := fault.As(err)
		if !ok || f.Kind != fault.Invalid || f.Code != c.code || f.Next == "" {
			t.Errorf("%s: %#v", c.name, err)
		}
	}
}

func TestAlreadyApart(t *testing.T) {
	r, err := Min(5, []Edge{{0, 1, 7}, {2, 3, 7}}, []int32{0}, []int32{2, 3})
	want := Result{Side: []int32{0, 1}, FirstGroup: true, Ambiguous: 1} // vertex 4 belongs to nobody
	if diff := cmp.Diff(want, r); diff != "" || err != nil {
		t.Errorf("%v (-want +got):\n%s", err, diff)
	}
}

func FuzzMin(f *testing.F) {
	f.Fuzz(rapid.MakeFuzz(func(t *rapid.T) {
		q := drawQuestion(t, 9)
		want := byExhaustion(q.n, q.edges, q.first, q.second)
		if diff := cmp.Diff(want, ask(t, q)); diff != "" {
			t.Fatalf("%+v (-want +got):\n%s", q, diff)
		}
	}))
}
