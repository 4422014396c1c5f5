package synth

// transmitters of the invented cells; a cell has one.
var transmitters = []string{"acetylcholine", "acetylcholine", "glutamate", "gaba"}

const (
	twigs      = 0.45 // share of dendrite pieces near an axon that send a twig to it
	twigReach  = 1700.0
	against    = 60.0 // nm: pieces not farther apart, beyond a cleft, lie against each other
	direct     = 0.6  // share of places where an axon lies against a dendrite that are synapses
	mistaken   = 0.04 // synapses that are none
	misread    = 0.08 // transmitters read wrongly
	leastCleft = 20.0
)

// growTwigs sends short side branches from dendrites to axons nearby. A twig is a head, and a thin neck when it is long.
func (t *tissue) growTwigs() {
	n := t.near()
	for d, p := range t.pieces {
		if p.part != dendrite || t.rng.Float64() > twigs {
			continue
		}
		best, short := -1, twigReach
		n.each(p.at, func(i int) {
			q := t.pieces[i]
			if gap := p.at.distance(q.at) - p.radius - q.radius; q.part == axon && q.cell != p.cell && gap > 350 && gap < short {
				best, short = i, gap
			}
		})
		if best < 0 {
			continue
		}
		to := t.pieces[best]
		out, from := p.at.towards(to.at), d
		if short > 800 {
			from = t.add(piece{at: p.at.plus(out, p.radius+short/3), radius: t.between(50, 80), length: short * 2 / 3, cell: p.cell, parent: d, part: twig})
			t.join(d, from)
		}
		radius := t.between(120, 200)
		head := t.add(piece{at: to.at.plus(out, -(to.radius + radius + leastCleft)), radius: radius, length: 2 * radius, cell: p.cell, parent: from, part: twig})
		t.join(from, head)
		t.reach = append(t.reach, reach{best, head})
	}
}

// synapses lists the cells' synapses: where twigs reached an axon, where axons lie against dendrites, and a few that are
// mistaken. ids are the pieces'.
func (t *tissue) synapses(ids, own []uint64) []Synapse {
	var out []Synapse
	add := func(pre, post int, confidence float64) {
		p, q := t.pieces[pre], t.pieces[post]
		u := p.at.towards(q.at)
		at := p.at.plus(u, p.radius+leastCleft/2)
		name := transmitters[t.rng.IntN(len(transmitters))]
		if t.rng.Float64() >= misread && p.cell >= 0 {
			name = t.cells[p.cell].transmitter
		}
		out = append(out, Synapse{ID: own[len(out)], Pre: ids[pre], Post: ids[post], X: at[0], Y: at[1], Z: at[2], Confidence: confidence, Transmitter: name})
	}
	for _, r := range t.reach {
		add(r.axon, r.head, t.between(0.6, 1))
	}
	for _, place := range t.places() {
		j := t.touch[place[t.rng.IntN(len(place))]]
		pre, post := j.a, j.b
		if t.rng.IntN(2) == 0 {
			pre, post = post, pre
		}
		if t.pieces[post].part == axon && t.pieces[pre].part != axon {
			pre, post = post, pre
		}
		receives := t.pieces[post].part == dendrite || t.pieces[post].part == soma
		switch {
		case t.pieces[pre].part == axon && receives && t.apart(pre, post) < against && t.rng.Float64() < direct:
			add(pre, post, t.between(0.55, 1))
		case t.rng.Float64() < mistaken:
			add(pre, post, t.between(0.3, 0.75))
		}
	}
	return out
}

// places groups the touches of two different cells by where they are: indexes into touch.
func (t *tissue) places() [][]int {
	const wide = 1600.0
	type key struct {
		a, b int
		at   [3]int
	}
	index := make(map[key]int)
	var out [][]int
	for i, j := range t.touch {
		p, q := t.pieces[j.a], t.pieces[j.b]
		if p.cell == q.cell || p.cell < 0 || q.cell < 0 || p.part == twig || q.part == twig {
			continue
		}
		k := key{a: min(p.cell, q.cell), b: max(p.cell, q.cell)}
		for d := range k.at {
			k.at[d] = int((p.at[d] + q.at[d]) / 2 / wide)
		}
		at, ok := index[k]
		if !ok {
			at = len(out)
			index[k] = at
			out = append(out, nil)
		}
		out[at] = append(out[at], i)
	}
	return out
}
