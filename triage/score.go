package triage

import (
	"context"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/stats"
	"fettle.example/fettle/ledger"
)

// Quality is how well the segments at a position meet the delivered truth. It is for scoring alone: no detector reads it.
type Quality struct {
	Position int64
	stats.Agreement
	Scored, NotScored int64 // voxels with and without a true neuron
	// FalseMerges counts, over segments, the true neurons beyond the first; FalseSplits, over true neurons, the segments beyond the
	// first. An overlap of fewer than CountedLeast supervoxels is not counted.
	FalseMerges, FalseSplits int
}

// CountedLeast is the fewest supervoxels that an overlap of a neuron and a segment must have to be counted as an error.
const CountedLeast = 5

// Score compares with truth. Volumes delivered without truth are fault.NotFound. O(supervoxels).
func Score(ctx context.Context, v *ledger.Volume, at ledger.At) (*Quality, error) {
	if !v.Info().HasTruth {
		return nil, fault.Newf(fault.NotFound, "truth-missing", "volume %s was delivered without truth", v.Name()).
			WithNext("quality can only be computed for volumes with a truth table")
	}
	position, err := v.Resolve(ctx, at)
	if err != nil {
		return nil, err
	}
	truth, has, voxels, err := v.Base().Truth(ctx, v.Pool())
	if err != nil {
		return nil, err
	}
	q := &Quality{Position: position}
	var scored []uint32
	for g := range truth {
		if has[g] {
			scored = append(scored, uint32(g))
			q.Scored += voxels[g]
		} else {
			q.NotScored += voxels[g]
		}
	}
	ids, err := v.Base().SupervoxelIDs(ctx, v.Pool(), scored)
	if err != nil {
		return nil, err
	}
	if at.Time != nil || at.Position != nil {
		at = ledger.AtPosition(position)
	}
	segments, err := v.SegmentsOf(ctx, ids, at)
	if err != nil {
		return nil, err
	}
	rows := make([]stats.Overlap[ledger.ID, ledger.ID], len(scored))
	counts := make(map[[2]ledger.ID]int)
	for i, g := range scored {
		rows[i] = stats.Overlap[ledger.ID, ledger.ID]{True: truth[g], Segment: segments[i], Weight: float64(voxels[g])}
		counts[[2]ledger.ID{truth[g], segments[i]}]++
	}
	q.Agreement, _ = stats.Agree(rows)
	inNeuron, inSegment := make(map[ledger.ID]int), make(map[ledger.ID]int)
	for pair, n := range counts {
		if n >= CountedLeast {
			inNeuron[pair[0]]++
			inSegment[pair[1]]++
		}
	}
	for _, n := range inNeuron {
		q.FalseSplits += n - 1
	}
	for _, n := range inSegment {
		q.FalseMerges += n - 1
	}
	return q, nil
}
