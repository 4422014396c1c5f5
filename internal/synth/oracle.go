package synth

import (
	"cmp"
	"encoding/binary"
	"encoding/csv"
	"fmt"
	"hash/fnv"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"time"
)

// Oracle is a simulated proofreader: it looks up what is true, takes time to think, and now and then is wrong. The same person
// judges the same place alike, in whatever order the places come.
type Oracle struct {
	truth  map[uint64]uint64 // supervoxel: true neuron
	habits Habits
}

// Habits are how a simulated person works.
type Habits struct {
	Person    string
	Seed      uint64
	ErrorRate float64       // share of verdicts that are the wrong way round
	Median    time.Duration // thinking time for a false split; a false merge takes twice as long
	Spread    float64       // of the logarithm of the time; 0: always the median
}

// Verdict is how a person would resolve a task.
type Verdict struct {
	Outcome string     // "corrected", "sound" or "unclear"
	Groups  [][]uint64 // seeds of the split to post; of a merge nothing
	Took    time.Duration
	Wrong   bool // against better knowledge
}

// Outcomes.
const (
	Corrected = "corrected"
	Sound     = "sound"
	Unclear   = "unclear"
)

// NewOracle makes a simulated person from the truth.
func NewOracle(truth map[uint64]uint64, habits Habits) *Oracle {
	return &Oracle{truth: truth, habits: habits}
}

// Habitual draws a person's habits from the name: half to one and a half minutes for a false split, and 2 to 8 % errors.
func Habitual(person string, seed uint64) Habits {
	h := Habits{Person: person, Seed: seed, Spread: 0.5}
	rng := h.rng(nil)
	h.ErrorRate = 0.02 + 0.06*rng.Float64()
	h.Median = time.Duration((0.5 + rng.Float64()) * float64(time.Minute)).Round(time.Second)
	return h
}

// Truth is the true neuron of each supervoxel that has one.
func (r *Rows) Truth() map[uint64]uint64 {
	truth := make(map[uint64]uint64, len(r.Supervoxels))
	for _, s := range r.Supervoxels {
		if s.Neuron != 0 {
			truth[s.ID] = s.Neuron
		}
	}
	return truth
}

// ReadTruth reads a delivery's table truth.csv as Write writes it.
func ReadTruth(dir string) (map[uint64]uint64, error) {
	f, err := os.Open(filepath.Join(dir, "truth.csv"))
	if err != nil {
		return nil, err
	}
	defer f.Close()
	r := csv.NewReader(f)
	if _, err := r.Read(); err != nil {
		return nil, fmt.Errorf("%s: header: %w", f.Name(), err)
	}
	truth := make(map[uint64]uint64)
	for {
		row, err := r.Read()
		if err == io.EOF {
			return truth, nil
		}
		if err != nil {
			return nil, err
		}
		id, err1 := strconv.ParseUint(row[0], 10, 64)
		neuron, err2 := strconv.ParseUint(row[1], 10, 64)
		if err := cmp.Or(err1, err2); err != nil {
			return nil, fmt.Errorf("%s: %w", f.Name(), err)
		}
		truth[id] = neuron
	}
}

// Merge judges the proposal to join the segments of two supervoxels.
func (o *Oracle) Merge(a, b uint64) Verdict {
	rng := o.habits.rng([]uint64{a, b})
	v := Verdict{Took: o.habits.think(rng, 1)}
	x, y := o.truth[a], o.truth[b]
	switch {
	case x == 0 || y == 0:
		v.Outcome = Unclear
		return v
	case x == y:
		v.Outcome = Corrected
	default:
		v.Outcome = Sound
	}
	if v.Wrong = rng.Float64() < o.habits.ErrorRate; v.Wrong {
		v.Outcome = opposite(v.Outcome)
	}
	return v
}

// Split judges the proposal to part a segment between groups of seeds. Members are the segment's supervoxels: from them the
// person takes better seeds, all over each of the two neurons, when the split is right.
func (o *Oracle) Split(proposed [][]uint64, members []uint64) Verdict {
	rng := o.habits.rng(slices.Concat(proposed...))
	v := Verdict{Took: o.habits.think(rng, 2)}
	neurons := make([]uint64, len(proposed))
	for i, group := range proposed {
		neurons[i] = o.most(group)
	}
	if len(proposed) < 2 || slices.Contains(neurons, 0) {
		v.Outcome = Unclear
		return v
	}
	v.Wrong = rng.Float64() < o.habits.ErrorRate
	if same := len(slices.Compact(slices.Sorted(slices.Values(neurons)))) < len(neurons); same != v.Wrong {
		v.Outcome = Sound
		return v
	}
	v.Outcome = Corrected
	if v.Groups = proposed; !v.Wrong {
		v.Groups = o.seeds(proposed, neurons, members)
	}
	return v
}

// seeds are, for each neuron, those proposed ones that are its own, and others evenly over its supervoxels here.
func (o *Oracle) seeds(proposed [][]uint64, neurons, members []uint64) [][]uint64 {
	const most = 24
	sorted := slices.Sorted(slices.Values(members))
	out := make([][]uint64, len(neurons))
	for i, n := range neurons {
		var own []uint64
		for _, id := range sorted {
			if o.truth[id] == n {
				own = append(own, id)
			}
		}
		for _, id := range proposed[i] {
			if o.truth[id] == n {
				out[i] = append(out[i], id)
			}
		}
		for k := range min(most, len(own)) {
			if id := own[k*len(own)/min(most, len(own))]; !slices.Contains(out[i], id) {
				out[i] = append(out[i], id)
			}
		}
	}
	return out
}

// most is the neuron that most of some supervoxels belong to; 0 when none has one. Of equals, the first met.
func (o *Oracle) most(ids []uint64) (neuron uint64) {
	counts := make(map[uint64]int)
	for _, id := range ids {
		if n := o.truth[id]; n != 0 {
			counts[n]++
		}
	}
	for _, id := range ids {
		if n := o.truth[id]; counts[n] > counts[neuron] {
			neuron = n
		}
	}
	return neuron
}

func opposite(outcome string) string {
	if outcome == Sound {
		return Corrected
	}
	return Sound
}

// think draws a thinking time: log-normal, as handling times are.
func (h Habits) think(rng *rand.Rand, times float64) time.Duration {
	return time.Duration(times * float64(h.Median) * math.Exp(h.Spread*rng.NormFloat64()))
}

// rng is a generator of its own for each person and place.
func (h Habits) rng(place []uint64) *rand.Rand {
	sum := fnv.New64a()
	io.WriteString(sum, h.Person)
	for _, id := range slices.Sorted(slices.Values(place)) {
		sum.Write(binary.LittleEndian.AppendUint64(nil, id))
	}
	return rand.New(rand.NewPCG(h.Seed, sum.Sum64()))
}
