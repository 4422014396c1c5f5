package tasks

import (
	"time"

	"github.com/google/uuid"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/triage"
)

// States of a task. The database holds the same words, and the steps between them, in task_step:
//
//	open ⇄ claimed → resolved → accepted
//	   ↘      ↓          ↘ returned
//	     overtaken
const (
	Open      = "open"      // waits for somebody
	Claimed   = "claimed"   // is in somebody's hands
	Resolved  = "resolved"  // has an outcome, and waits for a review
	Accepted  = "accepted"  // a second person agreed
	Returned  = "returned"  // a second person disagreed; the place becomes a new task
	Overtaken = "overtaken" // somebody else's entry answered it
)

// Outcomes of a task.
const (
	Corrected = "corrected" // an entry was posted
	Sound     = "sound"     // there is no error
	Unclear   = "unclear"   // the images don't tell
)

// Verdicts of a review.
const (
	Accept = "accept"
	Return = "return"
)

// Ways in which a claim ends.
const (
	EndedResolved  = "resolved"
	EndedReleased  = "released"  // given back
	EndedExpired   = "expired"   // its lease ran out
	EndedOvertaken = "overtaken" // somebody else's entry changed the place under it
)

// Task is one unit of human work: one place in a volume that may be wrong.
type Task struct {
	ID          uuid.UUID // names it for ever, in entries too
	Number      int64     // names it within its volume: what people type
	Volume      string
	Key         string // triage's name of the place, the same under changing segment ids
	Family      string // of detectors: size, branching, polarity …
	Kind        string // false-merge or false-split
	State       string
	Segments    []ledger.ID // the ones it is about, ascending; each is in one person's hands while the task is
	Point       base.Point  // where to look, nm
	Said        string      // what triage said, a sentence
	Findings    []triage.Finding
	Proposal    *triage.Proposal
	Probability float64 // that there is an error
	Gain        float64 // expected synapses put right
	Minutes     float64 // expected handling time
	Priority    float64 // gain per minute
	AssignedTo  string
	MadeAt      time.Time
	Waits       int         // how many of its segments' lines it isn't the head of; 0 can be claimed
	Claim       *Claim      // the live one, or the one that ended the task
	Resolution  *Resolution // once resolved
	Review      *Review     // once accepted or returned
}

// Claim is one person's hold on one task.
type Claim struct {
	ID        uuid.UUID
	Task      int64
	Person    string
	At, Until time.Time
	EndedAt   *time.Time
	Ended     string // how, "" while it is live
}

// Resolution is how a task ended.
type Resolution struct {
	Outcome  string
	Person   string
	At       time.Time
	Note     string
	Position int64 // of the entry, 0 unless corrected
}

// Review is what a second person said of a resolution.
type Review struct {
	Verdict  string
	Person   string
	At       time.Time
	Note     string
	Reversal int64 // position of the entry that undid the correction, 0 unless one was returned
}
