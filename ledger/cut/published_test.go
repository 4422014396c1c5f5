package cut

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"testing"
)

// Values computed by other programs (networkx 2.8.8, python-igraph 0.10.2,
// scipy 1.10.1, all from Debian 12): testdata/checks/README.md.

func readChecks(t *testing.T, name string, into any) {
	t.Helper()
	text, err := os.ReadFile(filepath.Join("..", "..", "testdata", "checks", name))
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(text, into); err != nil {
		t.Fatal(err)
	}
}

type flowCase struct {
	Name     string   `json:"name"`
	Directed bool     `json:"directed"`
	Source   any      `json:"source"` // a number or a name
	Sink     any      `json:"sink"`
	Edges    [][3]any `json:"edges"`
	MaxFlow  int64    `json:"max_flow"`
	Side     []string `json:"source_minimal_side"`
	Unique   bool     `json:"unique_min_cut"`
}

// question numbers the case's vertices by name. Half of the cases are
// directed; they become undirected by an identity: with x_v = 1 on the
// source's side, a one-way capacity costs c*x_u*(1-x_v), and
// 2*x_u*(1-x_v) = |x_u-x_v| + x_u + (1-x_v) - 1, which is an edge u-v, an edge
// u-sink and an edge source-v of c each, less a constant c. Every division
// then costs twice as much plus all capacities: sides and ties are unchanged.
func (c *flowCase) question() (q question, names []string, flow int64) {
	number := map[string]int32{}
	of := func(name any) int32 {
		s := fmt.Sprint(name)
		if _, ok := number[s]; !ok {
			number[s] = int32(len(names))
			names = append(names, s)
		}
		return number[s]
	}
	s, t := of(c.Source), of(c.Sink)
	flow = c.MaxFlow
	for _, e := range c.Edges {
		u, v, capacity := of(e[0]), of(e[1]), int64(e[2].(float64))
		q.edges = append(q.edges, Edge{u, v, capacity})
		if c.Directed {
			q.edges = append(q.edges, Edge{u, t, capacity}, Edge{s, v, capacity})
		}
	}
	if c.Directed {
		flow *= 2
		for _, e := range c.Edges {
			flow += int64(e[2].(float64))
		}
	}
	q.n, q.first, q.second = len(names), []int32{s}, []int32{t}
	return q, names, flow
}

func TestPublishedFlows(t *testing.T) {
	var cases []flowCase
	readChecks(t, "maxflow_cases.json", &cases)
	if len(cases) != 13 {
		t.Fatalf("%d cases, want 13", len(cases))
	}
	for _, c := range cases {
		q, names, flow := c.question()
		r := ask(t, q)
		if r.Flow != flow || r.Capacity != flow {
			t.Errorf("%s: flow %d, capacity %d, want %d", c.Name, r.Flow, r.Capacity, flow)
		}
		if r.Unique() != c.Unique {
			t.Errorf("%s: %d ambiguous, want unique %v", c.Name, r.Ambiguous, c.Unique)
		}
		if got := leastSourceSide(t, q, names); !slices.Equal(got, slices.Sorted(slices.Values(c.Side))) {
			t.Errorf("%s: the source's side is %v, want %v", c.Name, got, c.Side)
		}
	}
}

func leastSourceSide(t *testing.T, q question, names []string) []string {
	w, err := NewNetwork(q.n, q.edges)
	if err != nil {
		t.Fatal(err)
	}
	w.maximize(q.first, q.second)
	w.ambiguous() // lets both searches end
	var side []string
	for _, v := range w.front[0].queue {
		side = append(side, names[v])
	}
	slices.Sort(side)
	return side
}

// Seven supervoxels and ten contacts; cost and side from networkx and an
// exhaustive search.
func TestPublishedAffinities(t *testing.T) {
	var edges []Edge
	for _, c := range [][3]float64{
		{1, 2, .99}, {2, 3, .95}, {3, 4, .30}, {4, 5, .97}, {5, 6, .98},
		{2, 5, .20}, {1, 3, .90}, {4, 6, .96}, {3, 7, .60}, {7, 4, .55},
	} {
		capacity := -math.Log(1-c[2]) / Unit // the check's formula, not Capacity's
		edges = append(edges, Edge{int32(c[0]) - 1, int32(c[1]) - 1, int64(math.Round(capacity))})
	}
	r, err := Min(7, edges, []int32{0}, []int32{5})
	if err != nil {
		t.Fatal(err)
	}
	// the least side by count is {4,5,6}, the complement of {1,2,3,7}
	if !slices.Equal(r.Side, []int32{3, 4, 5}) || r.FirstGroup || !r.Unique() {
		t.Errorf("side %v of the first group %v, %d ambiguous", r.Side, r.FirstGroup, r.Ambiguous)
	}
	if got, want := float64(r.Flow)*Unit, 1.378326191470714; math.Abs(got-want) > 3*Unit {
		t.Errorf("cost %.9f, want %.9f", got, want)
	}
}

// A coarse scale rounds weak contacts to nothing; the case is networkx's. The
// true minimum cuts one contact of 0.35, and not ten of 0.04.
func TestFineUnitKeepsWeakContacts(t *testing.T) {
	for _, scale := range []float64{100, 1000, 1 / Unit} {
		unit := func(w float64) int64 { return max(MinCapacity, int64(math.Round(w*scale))) }
		const s, m, end = 10, 11, 12
		edges := []Edge{{m, end, unit(.35)}}
		for x := range int32(10) {
			edges = append(edges, Edge{s, x, unit(9)}, Edge{x, m, unit(.04)})
		}
		r, err := Min(13, edges, []int32{s}, []int32{end})
		if err != nil || !slices.Equal(r.Cut, []int{0}) {
			t.Errorf("scale %g: cut %v, %v", scale, r.Cut, err)
		}
	}
}

func TestCapacity(t *testing.T) {
	for _, c := range []struct {
		p    float64
		want int64
	}{
		{0.9, 2_197_225}, // ln(0.9/0.1) = 2.1972245773362196
		{0.1, 1},         // -2.197224577336219, clipped
		{0.5, 1},         // 0, and still one unit
		{0.500001, 4},    // 4.0e-6
		{0, 1}, {-3, 1}, {math.NaN(), 1}, {math.Inf(-1), 1},
		{1, LinkCapacity}, {2, LinkCapacity}, {math.Inf(1), LinkCapacity},
		{1 - 1e-6, LinkCapacity}, // ln(999999) = 13.815509557963774
		{1 - 1e-9, LinkCapacity},
	} {
		if got := Capacity(c.p); got != c.want {
			t.Errorf("Capacity(%v) = %d, want %d", c.p, got, c.want)
		}
	}
	for p := 0.0; p < 1; p += 1.0 / 4096 {
		if Capacity(p) > Capacity(p+1.0/4096) {
			t.Errorf("capacity falls at %v", p)
		}
	}
}

type fallingGraph struct {
	N          int        `json:"n"`
	Edges      [][2]int32 `json:"edges"`
	Bridges    [][2]int32 `json:"bridges"`
	Components [][]int32  `json:"components"`
	Deletions  []struct {
		Delete     [2]int32 `json:"delete"`
		Split      bool     `json:"split"`
		Smaller    []int32  `json:"smaller_side"`
		Components int      `json:"n_components"`
	} `json:"deletions"`
}

func (c *fallingGraph) edges() []Edge {
	edges := make([]Edge, len(c.Edges))
	for i, e := range c.Edges {
		edges[i] = Edge{A: e[0], B: e[1], Capacity: 1}
	}
	return edges
}

func readFallingGraphs(t *testing.T) []fallingGraph {
	t.Helper()
	var cases []fallingGraph
	readChecks(t, "bridges_and_deletions.json", &cases)
	if len(cases) != 10 {
		t.Fatalf("%d cases, want 10", len(cases))
	}
	return cases
}

func TestPublishedBridgesAndComponents(t *testing.T) {
	for i, c := range readFallingGraphs(t) {
		b, err := FindBridges(c.N, c.edges())
		if err != nil {
			t.Fatal(err)
		}
		var got [][2]int32
		for _, e := range b.Edges {
			got = append(got, c.Edges[e])
		}
		slices.SortFunc(got, func(x, y [2]int32) int { return slices.Compare(x[:], y[:]) })
		if !slices.Equal(got, c.Bridges) {
			t.Errorf("graph %d: bridges %v, want %v", i, got, c.Bridges)
		}
		label := Components(c.N, c.edges())
		for _, component := range c.Components {
			for _, v := range component {
				if label[v] != component[0] {
					t.Errorf("graph %d: vertex %d is labelled %d, want %d", i, v, label[v], component[0])
				}
			}
		}
	}
}

func TestPublishedDeletions(t *testing.T) {
	for i, c := range readFallingGraphs(t) {
		g, err := NewGraph(c.N, c.edges())
		if err != nil {
			t.Fatal(err)
		}
		w, pieces := g.Without(), len(c.Components)
		for j, d := range c.Deletions {
			w.Delete(slices.Index(c.Edges, d.Delete))
			side, apart := w.SmallerSide(d.Delete[0], d.Delete[1])
			if apart {
				pieces++
			}
			if apart != d.Split || pieces != d.Components || len(side) != len(d.Smaller) {
				t.Fatalf("graph %d, deletion %d: %v %v, want %v %v", i, j, apart, side, d.Split, d.Smaller)
			}
			if !slices.Equal(side, d.Smaller) {
				t.Errorf("graph %d, deletion %d: side %v, want %v", i, j, side, d.Smaller)
			}
		}
	}
}
