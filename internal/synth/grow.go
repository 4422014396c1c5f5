package synth

import "math"

// How cells grow, nm and chances a step. Insect neurons: the soma in the rind, one trunk into the middle, and from it a
// dendrite nearby and an axon that ends elsewhere.
const (
	step         = 500.0
	branching    = 0.035
	ending       = 0.02 // of branches of a higher order
	wander       = 0.22 // how much a branch turns a step
	slimming     = 0.8  // a daughter's radius over its parent's: Rall's 3/2 rule gives 0.63 for equal ones, real ones more
	thinDendrite = 150.0
	thinAxon     = 90.0
	bouton       = 0.12 // share of axon pieces that are swollen
	sided        = 0.25 // share of thick pieces that lie two abreast
	thick        = 330.0
	ownReach     = 1200.0 // how far a tip feels for its own cell; no two branches touch over more
)

// placeSomata puts the cells' bodies into the rind, apart from one another.
func (t *tissue) placeSomata(n int) {
	const apart = 1500.0
	for tries := 0; len(t.cells) < n && tries < 100000; tries++ {
		c := cell{radius: t.between(2600, 3600), transmitter: transmitters[t.rng.IntN(len(transmitters))]}
		for k := range c.centre {
			c.centre[k] = t.between(c.radius, t.size[k]-c.radius)
		}
		face := t.rng.IntN(6)
		depth := c.radius * t.between(1.05, 1.6)
		if c.centre[face/2] = depth; face%2 == 1 {
			c.centre[face/2] = t.size[face/2] - depth
		}
		free := true
		for _, o := range t.cells {
			free = free && o.centre.distance(c.centre) > o.radius+c.radius+apart
		}
		if free {
			t.cells = append(t.cells, c)
		}
	}
}

// grow lets one cell grow to about so many pieces.
func (t *tissue) grow(k, pieces int) {
	c := &t.cells[k]
	c.first = len(t.pieces)
	t.grown = newNear(ownReach)
	middle := point{t.size[0] / 2, t.size[1] / 2, t.size[2] / 2}
	in := c.centre.towards(middle.plus(t.anyway(), 0.15*t.size.norm()))
	from := t.growSoma(k, in)
	from, in = t.path(from, in, 480, 16+t.rng.IntN(12), middle)
	left := pieces - (len(t.pieces) - c.first)
	far := point{t.between(0.2, 0.8) * t.size[0], t.between(0.2, 0.8) * t.size[1], t.between(0.2, 0.8) * t.size[2]}
	t.arbor(from, in.plus(t.anyway(), 0.8).unit(), 400, dendrite, left*45/100)
	from, in = t.path(from, in, 260, 14+t.rng.IntN(18), far)
	t.arbor(from, in, 190, axon, left*40/100)
	c.last = len(t.pieces)
}

// growSoma makes the nucleus' piece and a shell around it, and returns the piece from which the trunk leaves.
func (t *tissue) growSoma(k int, out point) (exit int) {
	const shell = 22
	c := t.cells[k]
	nucleus := t.add(piece{at: c.centre, radius: 0.62 * c.radius, length: c.radius, cell: k, parent: -1, part: soma})
	exit = nucleus
	for i := range shell { // evenly over the sphere: a golden spiral
		z := 1 - (2*float64(i)+1)/shell
		r, turn := math.Sqrt(1-z*z), float64(i)*math.Pi*(3-math.Sqrt(5))
		at := c.centre.plus(point{r * math.Cos(turn), r * math.Sin(turn), z}, 0.8*c.radius)
		p := t.add(piece{at: at, radius: 0.34 * c.radius, length: 0.6 * c.radius, cell: k, parent: nucleus, part: soma})
		t.join(nucleus, p)
		for q := nucleus + 1; q < p; q++ {
			if t.pieces[q].at.distance(at) < 0.75*c.radius {
				t.join(q, p)
			}
		}
		if exit == nucleus || c.centre.plus(out, c.radius).distance(at) < c.centre.plus(out, c.radius).distance(t.pieces[exit].at) {
			exit = p
		}
	}
	return exit
}

// path grows an unbranched stretch towards a point.
func (t *tissue) path(from int, dir point, radius float64, steps int, to point) (int, point) {
	tip := cone{from: from, dir: dir, radius: radius, part: trunk}
	for range steps {
		if tip.dir = tip.dir.plus(t.pieces[tip.from].at.towards(to), 0.12).unit(); !t.advance(&tip) {
			break
		}
	}
	return tip.from, tip.dir
}

// cone is a growing tip.
type cone struct {
	from   int
	dir    point
	radius float64
	order  int
	part   part
}

// arbor lets a branching tree of one part grow until its budget of pieces is used up.
func (t *tissue) arbor(from int, dir point, radius float64, p part, budget int) {
	first, end := len(t.pieces), len(t.pieces)+budget
	tips := []cone{{from: from, dir: dir, radius: radius, part: p}}
	for tries := 0; len(t.pieces) < end && tries < 20*budget; tries++ {
		if len(tips) == 0 { // all ended: a side branch sprouts
			at := from
			if len(t.pieces) > first {
				at = first + t.rng.IntN(len(t.pieces)-first)
			}
			tips = append(tips, cone{from: at, dir: t.anyway(), radius: slimming * t.pieces[at].radius, order: 2, part: p})
		}
		i := t.rng.IntN(len(tips))
		tip := &tips[i]
		if !t.advance(tip) || tip.order > 1 && t.rng.Float64() < ending {
			tips[i] = tips[len(tips)-1]
			tips = tips[:len(tips)-1]
			continue
		}
		if t.rng.Float64() < branching {
			tips = append(tips, t.fork(tip))
		}
	}
}

// fork turns a tip aside and returns a second one that goes the other way; about 50 degrees lie between them.
func (t *tissue) fork(tip *cone) cone {
	aside := t.anyway()
	aside = aside.plus(tip.dir, -(aside[0]*tip.dir[0] + aside[1]*tip.dir[1] + aside[2]*tip.dir[2])).unit()
	other := *tip
	spread := t.between(0.3, 0.7)
	tip.dir, other.dir = tip.dir.plus(aside, spread).unit(), tip.dir.plus(aside, -spread).unit()
	tip.order, other.order = tip.order+1, other.order+1
	tip.radius, other.radius = tip.radius*t.between(slimming, 0.95), other.radius*t.between(0.6, slimming)
	return other
}

// advance grows a tip by one piece. It ends at the block's faces, and where it can get neither round a soma nor out of the way of
// its own cell.
func (t *tissue) advance(tip *cone) bool {
	tip.dir = tip.dir.plus(t.anyway(), wander).unit()
	from := t.pieces[tip.from]
	long := step * t.between(0.8, 1.2)
	at := from.at.plus(tip.dir, long)
	if c := t.bodyAt(at, from); c >= 0 { // round it
		tip.dir = tip.dir.plus(t.cells[c].centre.towards(at), 1.5).unit()
		at = from.at.plus(tip.dir, long)
	}
	if own := t.meets(at, tip); own >= 0 { // away from it
		tip.dir = tip.dir.plus(t.pieces[own].at.towards(at), 1).unit()
		at = from.at.plus(tip.dir, long)
	}
	if !t.inside(at) || t.bodyAt(at, from) >= 0 || t.meets(at, tip) >= 0 {
		return false
	}
	thin, radius := thinDendrite, tip.radius
	if tip.part == axon {
		thin = thinAxon
	}
	tip.radius = max(thin, tip.radius*0.995)
	if radius = max(thin, radius*t.between(0.85, 1.15)); tip.part == axon && t.rng.Float64() < bouton {
		radius = t.between(220, 350)
	}
	p := t.add(piece{at: at, radius: radius, length: long, cell: from.cell, parent: tip.from, part: tip.part})
	t.join(tip.from, p)
	if radius > thick && from.part != soma && t.rng.Float64() < sided {
		side := piece{at: at.plus(t.anyway(), 0.7*radius), radius: 0.6 * radius, length: long, cell: from.cell, parent: p, part: tip.part}
		if t.inside(side.at) {
			beside := t.add(side)
			t.join(p, beside)
			t.join(tip.from, beside)
		}
	}
	tip.from = p
	return true
}

// meets finds a piece of its own cell that a tip would touch: branches of a cell avoid each other.
func (t *tissue) meets(at point, tip *cone) int {
	met := -1
	t.grown.each(at, func(i int) {
		p := t.pieces[i]
		if met < 0 && p.at.distance(at) < p.radius+tip.radius+cleft+loose && !t.kin(i, tip.from) {
			met = i
		}
	})
	return met
}

// bodyAt finds the soma that a piece would grow into, its own one when it is still leaving it excepted.
func (t *tissue) bodyAt(at point, from piece) int {
	for k, c := range t.cells {
		if (k != from.cell || from.part != soma) && c.centre.distance(at) < c.radius*1.12 {
			if k == from.cell && c.centre.distance(at) > c.centre.distance(from.at) {
				continue
			}
			return k
		}
	}
	return -1
}
