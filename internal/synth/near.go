package synth

import "math"

// near finds pieces by place: a grid of cubes.
type near struct {
	side  float64 // of a cube, nm
	cubes map[[3]int32][]int32
}

func newNear(side float64) *near { return &near{side, make(map[[3]int32][]int32)} }

// near holds all pieces; no two touch over more than a cube's side.
func (t *tissue) near() *near {
	n := newNear(2500)
	for i, p := range t.pieces {
		n.add(p.at, i)
	}
	return n
}

func (n *near) add(at point, i int) {
	c := n.cube(at)
	n.cubes[c] = append(n.cubes[c], int32(i))
}

func (n *near) cube(p point) (c [3]int32) {
	for k := range p {
		c[k] = int32(math.Floor(p[k] / n.side))
	}
	return c
}

// each visits the pieces within a cube's side of a point, always in the same order.
func (n *near) each(at point, visit func(i int)) {
	c := n.cube(at)
	for x := c[0] - 1; x <= c[0]+1; x++ {
		for y := c[1] - 1; y <= c[1]+1; y++ {
			for z := c[2] - 1; z <= c[2]+1; z++ {
				for _, i := range n.cubes[[3]int32{x, y, z}] {
					visit(int(i))
				}
			}
		}
	}
}

const (
	cleft = 60.0 // nm between the membranes of pieces that lie against each other
	// loose is how much farther pieces may lie apart and still touch: they stand for half a micrometre of branch, and cells
	// fill the space between.
	loose = 250.0
)

// findTouches makes a contact wherever two pieces lie close to each other and no branch joins them.
func (t *tissue) findTouches() {
	n := t.near()
	for i, p := range t.pieces {
		n.each(p.at, func(j int) {
			q := t.pieces[j]
			over := loose - t.apart(i, j)
			if j <= i || over <= 0 || p.cell == q.cell && (p.cell < 0 || t.kin(i, j)) {
				return
			}
			r := min(p.radius, q.radius)
			t.touch = append(t.touch, joint{a: i, b: j, affinity: t.passing(i, j), area: 2000 + over*r*t.between(0.5, 1.5)})
		})
	}
}

// apart is how far apart two pieces lie, beyond a cleft.
func (t *tissue) apart(i, j int) float64 {
	p, q := t.pieces[i], t.pieces[j]
	return p.at.distance(q.at) - p.radius - q.radius - cleft
}

// kin says whether two pieces are near along their cell's branches, so that their touching is no contact of its own.
func (t *tissue) kin(i, j int) bool {
	const hops = 5
	var up [hops]int
	for k := range up {
		up[k] = i
		if i >= 0 {
			i = t.pieces[i].parent
		}
	}
	for range hops {
		if j < 0 {
			return false
		}
		for _, u := range up {
			if u == j {
				return true
			}
		}
		j = t.pieces[j].parent
	}
	return false
}
