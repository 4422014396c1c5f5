package synth

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
			parent := t.pieces[v].parent
			if taken[v] || taken[parent] {
				continue
			}
			taken[v], taken[parent] = true, true
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
