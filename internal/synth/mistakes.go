package synth

// Pair is a contact that the agglomeration got wrong.
type Pair struct {
	A, B     uint64
	Affinity float64
	Place    int    // the contacts of one place share a number, 1…
	Where    string // "seam", "gap", "thin", "twig"; of false merges "crossing"
}

// Answers are a volume's planted errors.
type Answers struct {
	FalseMerges []Pair // accepted, between two neurons: one to three at a place
	FalseSplits []Pair // rejected, inside one neuron
}

// Places counts the places of some pairs.
func Places(pairs []Pair) int {
	seen := make(map[int]bool)
	for _, p := range pairs {
		seen[p.Place] = true
	}
	return len(seen)
}

// splits makes false splits: the contacts of a branch become doubtful where images jump, where it is thin, or at a twig's
// neck. Places are numbered from 1; where[place-1] says of what kind each is.
func (t *tissue) splits(wanted int) (where []string) {
	candidates := t.branchPoints()
	shares := []struct {
		where   string
		percent int
	}{{"seam", 35}, {"gap", 25}, {"twig", 20}, {"thin", 20}}
	from := t.adjacent()
	taken := make(map[int]bool)
	for i, s := range shares {
		n := wanted * s.percent / 100
		if i == len(shares)-1 {
			n = wanted - len(where) // what the others could not give as well
		}
		list := candidates[s.where]
		t.rng.Shuffle(len(list), func(a, b int) { list[a], list[b] = list[b], list[a] })
		for _, v := range list {
			if n == 0 {
				break
			}
			if parent := t.pieces[v].parent; taken[v] || taken[parent] {
				continue
			}
			taken[v], taken[t.pieces[v].parent] = true, true
			where = append(where, s.where)
			n--
			t.loosen(v, from, len(where), s.where)
		}
	}
	return where
}

// branchPoints lists the pieces at whose foot a false split may lie, by kind. Nothing larger than two fifths of a cell is cut off.
func (t *tissue) branchPoints() map[string][]int {
	below, whole := make([]int, len(t.pieces)), make([]int, len(t.cells))
	for v := len(t.pieces) - 1; v >= 0; v-- { // children stand after their parents
		below[v]++
		p := t.pieces[v]
		if p.parent >= 0 {
			below[p.parent] += below[v]
		}
		if p.cell >= 0 {
			whole[p.cell]++
		}
	}
	out := make(map[string][]int)
	for v, p := range t.pieces {
		if p.cell < 0 || p.parent < 0 || p.part == soma || t.pieces[p.parent].part == soma {
			continue
		}
		crossed := t.crosses(v, p.parent)
		switch {
		case p.part == twig:
			if t.pieces[p.parent].part == dendrite {
				out["twig"] = append(out["twig"], v)
			}
		case below[v] < 5 || below[v] > whole[p.cell]*2/5:
		case crossed != "":
			out[crossed] = append(out[crossed], v)
		case p.radius < 160:
			out["thin"] = append(out["thin"], v)
		}
	}
	return out
}

// adjacent lists each piece's contacts inside its cell: indexes into own.
func (t *tissue) adjacent() [][]int {
	out := make([][]int, len(t.pieces))
	for i, j := range t.own {
		out[j.a] = append(out[j.a], i)
		out[j.b] = append(out[j.b], i)
	}
	return out
}

// loosen makes all contacts doubtful by which a branch hangs on its cell.
func (t *tissue) loosen(foot int, adjacent [][]int, place int, where string) {
	in := map[int]bool{foot: true}
	branch := []int{foot}
	for i := 0; i < len(branch); i++ {
		for _, k := range adjacent[branch[i]] {
			j := t.own[k]
			for _, v := range []int{j.a, j.b} {
				if !in[v] && t.pieces[v].parent >= 0 && in[t.pieces[v].parent] {
					in[v] = true
					branch = append(branch, v)
				}
			}
		}
	}
	most := 0.47
	if where == "gap" {
		most = 0.32
	}
	for _, v := range branch {
		for _, k := range adjacent[v] {
			if j := &t.own[k]; in[j.a] != in[j.b] {
				j.affinity, j.place = t.between(0.06, most), place
			}
		}
	}
}

// merges makes false merges: one to three contacts where two cells pass become good. Nothing percolates: a segment gets at most
// four cells and two nuclei, and no cell's fragments meet in it again. Places are numbered from the one given.
func (t *tissue) merges(wanted, place int) {
	const cells, nuclei = 4, 2
	parts := t.components()
	holds, bodies := make(map[int]map[int]bool), make(map[int]int)
	for v, p := range t.pieces {
		root := parts.find(v)
		if holds[root] == nil {
			holds[root] = make(map[int]bool)
		}
		if p.cell >= 0 {
			holds[root][p.cell] = true
			if p.parent < 0 {
				bodies[root]++
			}
		}
	}
	twoBodies := wanted / 3 // places that join two somata
	list := t.places()
	t.rng.Shuffle(len(list), func(a, b int) { list[a], list[b] = list[b], list[a] })
	for _, touches := range list {
		j := t.touch[touches[0]]
		a, b := parts.find(j.a), parts.find(j.b)
		joined := bodies[a] + bodies[b]
		both := bodies[a] > 0 && bodies[b] > 0
		if wanted == 0 || !t.crossing(j) || a == b || len(holds[a])+len(holds[b]) > cells || joined > nuclei || both && twoBodies == 0 || meet(holds[a], holds[b]) {
			continue
		}
		t.tighten(touches, parts, a, b, place)
		root := parts.union(a, b)
		all := make(map[int]bool)
		for _, side := range []int{a, b} {
			for c := range holds[side] {
				all[c] = true
			}
		}
		holds[root], bodies[root] = all, joined
		if both {
			twoBodies--
		}
		wanted, place = wanted-1, place+1
	}
}

// crossing says whether a touch is of two neurites, not of a soma.
func (t *tissue) crossing(j joint) bool {
	return t.pieces[j.a].part != soma && t.pieces[j.b].part != soma
}

func meet(a, b map[int]bool) bool {
	for c := range a {
		if b[c] {
			return true
		}
	}
	return false
}

// tighten raises the affinity of one to three contacts at a place, and makes the others between the same two parts doubtful.
func (t *tissue) tighten(touches []int, parts *unionFind, a, b, place int) {
	good := 1 + t.rng.IntN(3)
	for _, k := range touches {
		j := &t.touch[k]
		x, y := parts.find(j.a), parts.find(j.b)
		if !t.crossing(*j) || !(x == a && y == b || x == b && y == a) {
			continue
		}
		if good > 0 {
			u := t.rng.Float64()
			j.affinity, j.place = 0.51+0.3*u*u, place
		} else {
			j.affinity = t.between(0.02, 0.4)
		}
		good--
	}
}
