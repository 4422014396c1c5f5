package synth

// Pair is a contact that the agglomeration got wrong.
type Pair struct {
	A, B     uint64
	Affinity float64
	Place    int    // the contacts of one place share a number, 1…
	Where    string // "seam", "gap", "thin", "twig"; a false merge: "crossing"
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
