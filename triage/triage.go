// Package triage ranks what looks wrong: detectors look at segments and say what is suspicious, findings about one place
// become one unit of work, and what it is worth is stated in expected synapses put right.
//
// # What it promises
//
//   - A detector is a pure function of one loaded segment: the same segment gives the same findings.
//   - Every finding has a point, evidence in numbers with units, a sentence, and a probability whose origin is stated.
//   - Findings follow the ledger: a segment that an entry changed is judged again, that one alone. What is stored and the
//     position up to which the ledger was read move together.
//   - A place keeps its key while segment ids come and go, so that what a person found sound does not come back.
//
// # Reading
//
// case.go is what a detector sees; tree.go and weak.go what several of them need; then one file a detector. group.go makes
// places of findings, store.go and follow.go keep them, score.go compares with truth.
//
// # What it leaves to others
//
// Who looks at a place, and what becomes of it: package tasks. It posts nothing and never reads truth to judge.
package triage

import (
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
)

// Kinds of error that a finding suspects.
const (
	FalseMerge = "false-merge" // two cells in one segment
	FalseSplit = "false-split" // one cell in two segments
)

// Finding is what one detector said about one place.
type Finding struct {
	ID          int64       `json:"id,string,omitempty"`
	Detector    string      `json:"detector"`
	Family      string      `json:"family"`
	Kind        string      `json:"kind"`
	Key         string      `json:"key"` // names the place under changing segment ids
	Segments    []ledger.ID `json:"segments"`
	Point       base.Point  `json:"point_nm"`
	Evidence    []Evidence  `json:"evidence"`
	Said        string      `json:"said"`
	Probability float64     `json:"probability"` // that there is an error
	Moves       float64     `json:"moves"`       // synapses that a correction would move, or their expected number
	Gain        float64     `json:"gain"`        // Probability x Moves: expected synapses put right
	Proposal    *Proposal   `json:"proposal,omitempty"`
}

// Evidence is one number that speaks for a finding.
type Evidence struct {
	Name  string  `json:"name"`
	Value float64 `json:"value"`
	Unit  string  `json:"unit,omitempty"`
}

// Kinds of proposal.
const (
	ProposeSplit = "split"
	ProposeMerge = "merge"
)

// Proposal is the correction that a finding suggests.
type Proposal struct {
	Kind   string        `json:"kind"`
	A      ledger.ID     `json:"a,omitempty"` // of a merge: the two supervoxels to link
	B      ledger.ID     `json:"b,omitempty"`
	Groups [][]ledger.ID `json:"groups,omitempty"` // of a split: seeds of each side
}

// Detector is one rule that looks at a segment.
type Detector struct {
	Name   string
	Family string
	Kind   string
	Says   string // what it looks for, and where the rule comes from
	judge  func(*Case) []Finding
}
