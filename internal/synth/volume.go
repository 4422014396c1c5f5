package synth

import (
	"math"
	"math/rand/v2"
)

// Options say what volume to invent. The zero value is the demonstration's.
type Options struct {
	Seed    uint64
	Neurons int    // 0: 24; each brings some 830 supervoxels
	Name    string // "": cricket-ganglion
}

const (
	defaultName    = "cricket-ganglion"
	defaultNeurons = 24
	meanPieces     = 830
	spacePerCell   = 2.6e12 // nm³
	// Errors for every four neurons.
	mergesPerFour, splitsPerFour = 5, 10
)

// Write invents a volume, writes it as a delivery folder, and returns its planted errors.
func Write(dir string, opt Options) (*Answers, error) {
	rows, shape, answers := Make(opt)
	if err := rows.Write(dir, shape); err != nil {
		return nil, err
	}
	return answers, nil
}

// Make invents a volume: neurons that grow through a block with two seams and a gap, cut into supervoxels, agglomerated with
// false merges and false splits.
func Make(opt Options) (*Rows, Shape, *Answers) {
	if opt.Neurons <= 0 {
		opt.Neurons = defaultNeurons
	}
	if opt.Name == "" {
		opt.Name = defaultName
	}
	t := newTissue(opt)
	t.placeSomata(opt.Neurons)
	for k := range t.cells {
		t.grow(k, int(meanPieces*0.93*min(1.8, max(0.5, math.Exp(0.3*t.rng.NormFloat64()))))) // twigs come on top
	}
	t.growTwigs()
	t.scatter(opt.Neurons / 2)
	t.findTouches()
	where := t.splits(opt.Neurons * splitsPerFour / 4)
	t.merges(opt.Neurons*mergesPerFour/4, len(where)+1)
	rows, answers := t.deliver(opt.Name, where)
	return rows, t.shape, answers
}

func newTissue(opt Options) *tissue {
	side := math.Round(math.Cbrt(spacePerCell*float64(opt.Neurons)/0.75)/1000) * 1000
	size := point{side, side, math.Round(0.75*side/1000) * 1000}
	nm := func(share float64) float64 { return math.Round(share*size[2]/30) * 30 }
	return &tissue{
		rng:   rand.New(rand.NewPCG(opt.Seed, 2)),
		size:  size,
		grown: newNear(ownReach),
		shape: Shape{VoxelNM: [3]float64{8, 8, 30}, Max: size,
			Seams: []Seam{{"z", nm(0.31)}, {"z", nm(0.68)}},
			Gaps:  []Gap{{"z", nm(0.5), nm(0.5) + 180}}},
	}
}

// scatter adds debris: scraps of one or two supervoxels that belong to no neuron.
func (t *tissue) scatter(n int) {
	for range n {
		var at point
		for k := range at {
			at[k] = t.between(0.1, 0.9) * t.size[k]
		}
		first := t.add(piece{at: at, radius: t.between(100, 250), length: 300, cell: -1, parent: -1, part: debris})
		if t.rng.IntN(2) == 0 {
			t.join(first, t.add(piece{at: at.plus(t.anyway(), 350), radius: 120, length: 300, cell: -1, parent: first, part: debris}))
		}
	}
}

// deliver cuts the tissue into the rows of a delivery.
func (t *tissue) deliver(name string, where []string) (*Rows, *Answers) {
	for _, list := range [][]joint{t.own, t.touch} {
		for i := range list { // as written, so that segments are what the files say
			list[i].affinity = math.Round(list[i].affinity*1e4) / 1e4
		}
	}
	n := len(t.pieces)
	ids := pairedIDs(t.rng, 3*n+len(t.touch)+len(t.cells))
	pieces, segments, rest := ids[:n], ids[n:2*n], ids[2*n:]
	parts := t.components()
	r, a := &Rows{Name: name}, &Answers{}
	voxel := t.shape.VoxelNM[0] * t.shape.VoxelNM[1] * t.shape.VoxelNM[2]
	for i, p := range t.pieces {
		volume := math.Pi * p.radius * p.radius * p.length
		r.Supervoxels = append(r.Supervoxels, Supervoxel{ID: pieces[i], Segment: segments[parts.find(i)],
			Voxels: max(1, int64(volume/voxel)), X: p.at[0], Y: p.at[1], Z: p.at[2], Radius: p.radius, Neuron: uint64(p.cell + 1)})
	}
	for _, j := range append(t.own, t.touch...) {
		r.Contacts = append(r.Contacts, Contact{A: pieces[j.a], B: pieces[j.b], Affinity: j.affinity, Area: j.area})
		pair := Pair{A: pieces[j.a], B: pieces[j.b], Affinity: j.affinity, Place: j.place, Where: "crossing"}
		switch {
		case j.place == 0:
		case j.place <= len(where):
			pair.Where = where[j.place-1]
			a.FalseSplits = append(a.FalseSplits, pair)
		default:
			a.FalseMerges = append(a.FalseMerges, pair)
		}
	}
	for k, c := range t.cells {
		r.Nuclei = append(r.Nuclei, Nucleus{ID: rest[k], Supervoxel: pieces[c.first], X: c.centre[0], Y: c.centre[1], Z: c.centre[2],
			Volume: 4 / 3. * math.Pi * math.Pow(0.62*c.radius, 3)})
	}
	r.Synapses = t.synapses(pieces, rest[len(t.cells):])
	shuffle(t.rng, r)
	return r, a
}

// shuffle puts the rows in no order, as deliveries come.
func shuffle(rng *rand.Rand, r *Rows) {
	rng.Shuffle(len(r.Supervoxels), func(i, j int) { r.Supervoxels[i], r.Supervoxels[j] = r.Supervoxels[j], r.Supervoxels[i] })
	rng.Shuffle(len(r.Contacts), func(i, j int) { r.Contacts[i], r.Contacts[j] = r.Contacts[j], r.Contacts[i] })
	rng.Shuffle(len(r.Synapses), func(i, j int) { r.Synapses[i], r.Synapses[j] = r.Synapses[j], r.Synapses[i] })
}

// pairedIDs draws distinct ids, some of them neighbours that are one number as doubles.
func pairedIDs(rng *rand.Rand, n int) []uint64 {
	ids := randomIDs(rng, n)
	seen := make(map[uint64]bool, n)
	for _, id := range ids {
		seen[id] = true
	}
	for i := 49; i < n; i += 50 {
		if twin := ids[i-1] ^ 1; !seen[twin] {
			seen[twin] = true
			ids[i] = twin
		}
	}
	return ids
}
