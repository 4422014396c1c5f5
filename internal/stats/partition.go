package stats

import "math"

// Overlap is how much of one true neuron lies in one segment.
type Overlap[T, S comparable] struct {
	True    T
	Segment S
	Weight  float64 // voxels
}

// Agreement says how well a segmentation meets the truth.
type Agreement struct {
	// Split and Merge are the two halves of the variation of information, in bits: H(segment | truth), too cut up, and
	// H(truth | segment), too glued. Meila 2003, COLT, LNCS 2777:173-187.
	Split, Merge float64
	// Precision, Recall and Error are the adapted Rand scores with replacement: same-same pairs over pairs that the
	// segmentation joins, over pairs that truth joins, and 1 - 2PR/(P+R). Arganda-Carreras et al. 2015, Front. Neuroanat. 9:142.
	Precision, Recall, Error float64
	// Adjusted is the Rand index less what chance gives: 1 for equal partitions, about 0 for unrelated ones, negative below.
	// Hubert & Arabie 1985, J. Classification 2:193-218. A voxel is an element, so a weight is a number of elements.
	Adjusted float64
}

// Agree compares two partitions, given as overlaps; several rows for one pair are added up. Absent when all weights are 0.
func Agree[T, S comparable](rows []Overlap[T, S]) (a Agreement, ok bool) {
	type cell struct {
		t T
		s S
	}
	var cells tally[cell]
	var truth tally[T]
	var segments tally[S]
	var n float64
	for _, r := range rows {
		cells.add(cell{r.True, r.Segment}, r.Weight)
		truth.add(r.True, r.Weight)
		segments.add(r.Segment, r.Weight)
		n += r.Weight
	}
	if n <= 0 {
		return a, false
	}
	var both, inTruth, inSegments float64
	for i, w := range cells.weights {
		if c := cells.keys[i]; w > 0 {
			a.Split -= w / n * math.Log2(w/truth.of(c.t))
			a.Merge -= w / n * math.Log2(w/segments.of(c.s))
			both += w * w
		}
	}
	for _, w := range truth.weights {
		inTruth += w * w
	}
	for _, w := range segments.weights {
		inSegments += w * w
	}
	a.Split, a.Merge = max(0, a.Split), max(0, a.Merge)
	a.Precision, a.Recall = both/inSegments, both/inTruth
	a.Error = 1 - 2*a.Precision*a.Recall/(a.Precision+a.Recall)
	a.Adjusted = adjusted(both, inTruth, inSegments, n)
	return a, true
}

// adjusted takes sums of squared weights: pairs of elements are (x² - x)/2, and the weights of each kind add up to n.
func adjusted(both, inTruth, inSegments, n float64) float64 {
	pairs := func(squares float64) float64 { return (squares - n) / 2 }
	chance := pairs(inTruth) * pairs(inSegments) / pairs(n*n)
	most := (pairs(inTruth) + pairs(inSegments)) / 2
	if most == chance || n == 1 {
		return 1 // both in one block, or both in singletons
	}
	return (pairs(both) - chance) / (most - chance)
}

// tally adds weights up by key, and keeps the order in which keys came: sums over it are the same each time, to the last bit.
type tally[K comparable] struct {
	at      map[K]int
	keys    []K
	weights []float64
}

func (t *tally[K]) add(k K, w float64) {
	i, ok := t.at[k]
	if !ok {
		if t.at == nil {
			t.at = make(map[K]int)
		}
		i = len(t.keys)
		t.at[k] = i
		t.keys, t.weights = append(t.keys, k), append(t.weights, 0)
	}
	t.weights[i] += w
}

func (t *tally[K]) of(k K) float64 { return t.weights[t.at[k]] }
