package synth

// A segment gets at most so many cells, and so many somata: nothing percolates.
const (
	mostCells  = 4
	mostSomata = 2
)

// merges makes false merges: one to three contacts where two cells pass become good. A third of them at most join two somata.
// Places are numbered from the one given.
func (t *tissue) merges(wanted, place int) {
	parts := t.parts()
	large := wanted / 3
	list := t.places()
	t.rng.Shuffle(len(list), func(a, b int) { list[a], list[b] = list[b], list[a] })
	for _, touches := range list {
		j := t.touch[touches[0]]
		a, b := parts.find(j.a), parts.find(j.b)
		both := parts.somata[a] > 0 && parts.somata[b] > 0
		if wanted == 0 || !t.crossing(j) || !parts.mayJoin(a, b) || both && large == 0 {
			continue
		}
		t.tighten(touches, parts.unionFind, a, b, place)
		parts.join(a, b)
		if both {
			large--
		}
		wanted, place = wanted-1, place+1
	}
}

// parts are the segments in the making, and what each holds, by its root.
type parts struct {
	*unionFind
	cells  map[int]map[int]bool
	somata map[int]int
}

func (t *tissue) parts() *parts {
	p := &parts{t.components(), make(map[int]map[int]bool), make(map[int]int)}
	for v, q := range t.pieces {
		root := p.find(v)
		if p.cells[root] == nil {
			p.cells[root] = make(map[int]bool)
		}
		if q.cell >= 0 {
			p.cells[root][q.cell] = true
			if q.parent < 0 {
				p.somata[root]++
			}
		}
	}
	return p
}

// mayJoin says whether two parts are apart, not too much together, and of different cells: two fragments of one cell must not
// meet again, or its false split would be none.
func (p *parts) mayJoin(a, b int) bool {
	if a == b || len(p.cells[a])+len(p.cells[b]) > mostCells || p.somata[a]+p.somata[b] > mostSomata {
		return false
	}
	for c := range p.cells[a] {
		if p.cells[b][c] {
			return false
		}
	}
	return true
}

func (p *parts) join(a, b int) {
	root := p.union(a, b)
	other := a + b - root
	for c := range p.cells[other] {
		p.cells[root][c] = true
	}
	p.somata[root] += p.somata[other]
}

// crossing says whether a touch is of two neurites, not of a soma.
func (t *tissue) crossing(j joint) bool {
	return t.pieces[j.a].part != soma && t.pieces[j.b].part != soma
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
