package cut

import "math"

// Unit is the log-odds (natural logarithm) that one unit of capacity stands
// for. Capacities are whole numbers, so that sums are exact; a coarser unit
// would round weak contacts to nothing and cut ten of them for one stronger.
const Unit = 1e-6

const (
	// MinCapacity is the floor, in units. A free edge would leave the cut
	// undecided. Contacts of affinity 0.5 and less all have it.
	MinCapacity int64 = 1

	// AssumedCapacity is that of a link which nobody observed: it only holds
	// together a segment that was delivered in pieces. In units.
	AssumedCapacity = MinCapacity

	// LinkCapacity is that of a link which a person made, in units: the
	// log-odds of the largest probability, 1-1e-6. Strong, yet finite, so that
	// a split may still undo a merge if that is what the groups ask for.
	LinkCapacity int64 = 13_815_510
)

// clamp keeps the log-odds finite: probabilities are held in
// [clamp, 1-clamp].
const clamp = 1e-6

// Capacity returns what it costs to cut a contact whose ends are one cell with
// probability p, in units: the log-odds ln(p/(1-p)), and never less than
// MinCapacity.
//
// Cutting an independent contact costs -ln(1-p), keeping it -ln p; the
// difference is the log-odds. It is negative below p = 0.5, which would make
// the problem a multicut, so it is clipped there: Capacity(0.5) is one unit.
// A p that is not a number counts as 0.
func Capacity(p float64) int64 {
	if !(p > clamp) {
		return MinCapacity
	}
	p = math.Min(p, 1-clamp)
	return max(MinCapacity, int64(math.Round(math.Log(p/(1-p))/Unit)))
}
