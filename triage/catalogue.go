package triage

import "cmp"

// catalogue is every detector, in the order in which people read about them.
var catalogue = []Detector{
	sizeOutlier,
	crossing, turningBack, thickDaughter,
	polarityConflict,
	weakBridge,
	severalNuclei,
	facingTip,
	strongContact,
}

// Catalogue lists the detectors.
func Catalogue() []Detector { return catalogue }

// leastProbability is what a finding must reach to be kept: below it, people would look at 20 places to find one error.
const leastProbability = 0.05

// Judge lets every detector look at a segment. The findings of one detector are in order of gain.
func Judge(c *Case) []Finding {
	var out []Finding
	for _, d := range catalogue {
		for _, f := range d.judge(c) {
			if f.Probability < leastProbability {
				continue
			}
			f.Detector, f.Family, f.Kind = d.Name, d.Family, d.Kind
			out = append(out, f)
		}
	}
	return out
}

// minutesPrior is how long a person is expected to take, by kind, until the team's own times are known: our own estimates.
var minutesPrior = map[string]float64{FalseMerge: 3, FalseSplit: 1.5}

// byWorth orders findings by gain, ties by key and detector, so that the order never depends on anything else.
func byWorth(a, b Finding) int {
	return cmp.Or(-cmp.Compare(a.Gain, b.Gain), cmp.Compare(a.Key, b.Key), cmp.Compare(a.Detector, b.Detector))
}
