package api

import (
	"encoding/hex"
	"strconv"
	"time"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/tasks"
	"fettle.example/fettle/triage"
)

// some is a pointer to a value, or nil for the zero one: the contract leaves out what is not there.
func some[T comparable](v T) *T {
	var zero T
	if v == zero {
		return nil
	}
	return &v
}

func value[T any](p *T) T {
	if p == nil {
		var zero T
		return zero
	}
	return *p
}

func each[T, U any](in []T, to func(T) U) []U {
	out := make([]U, len(in))
	for i, v := range in {
		out[i] = to(v)
	}
	return out
}

func toIDs(ids []ledger.ID) IDs { return each(ids, ledger.ID.String) }

// readIDs reads ids of a request; field is where they stand in it.
func readIDs(texts []string, field string) ([]ledger.ID, error) {
	out := make([]ledger.ID, len(texts))
	for i, t := range texts {
		id, err := readID(t, field)
		if err != nil {
			return nil, err
		}
		out[i] = id
	}
	return out, nil
}

func readID(text, field string) (ledger.ID, error) {
	id, err := base.ParseID(text)
	if f, ok := fault.As(err); ok {
		err = f.WithField(field)
	}
	return id, err
}

// readAt reads a position or an RFC 3339 time.
func readAt(text *string) (ledger.At, error) {
	if text == nil || *text == "" {
		return ledger.At{}, nil
	}
	if p, err := strconv.ParseInt(*text, 10, 64); err == nil {
		return ledger.AtPosition(p), nil
	}
	if t, err := time.Parse(time.RFC3339Nano, *text); err == nil {
		return ledger.At{Time: &t}, nil
	}
	return ledger.At{}, fault.Newf(fault.Invalid, "at-malformed", "%q is neither a position nor a time", *text).WithField("at").
		WithNext("give a whole number, or a time like 2026-03-01T09:30:00Z")
}

func toPoint(p base.Point) Point { return p[:] }

func toTotals(t ledger.Totals) Totals {
	return Totals{Supervoxels: t.Supervoxels, Voxels: t.Voxels, SynapsesIn: t.SynapsesIn, SynapsesOut: t.SynapsesOut, Nuclei: t.Nuclei,
		MinNm: toPoint(t.Min), MaxNm: toPoint(t.Max)}
}

func toSegment(s ledger.Segment, became []ledger.ID) Segment {
	return Segment{Id: s.ID.String(), Current: s.Retired == 0, Born: s.Born, Retired: some(s.Retired), Totals: toTotals(s.Totals), Became: toIDs(became)}
}

// toCurrent is a segment that is known to be current.
func toCurrent(s ledger.Segment) Segment { return toSegment(s, []ledger.ID{s.ID}) }

func toPairs(pairs [][2]ledger.ID) []Pair {
	return each(pairs, func(p [2]ledger.ID) Pair { return toIDs(p[:]) })
}

func toEdges(e ledger.Edges) Edges {
	return Edges{Contacts: toPairs(e.Contacts), Links: toPairs(e.Links)}
}

func toEntry(e ledger.Entry) Entry {
	out := Entry{Volume: e.Volume, Position: e.Position, Id: e.ID, Kind: EntryKind(e.Kind), Person: e.Person, Agent: some(e.Agent), At: e.At, Task: e.Task,
		Reason: e.Reason, Reverses: some(e.Reverses), Before: toIDs(e.Before), After: toIDs(e.After), Joined: toEdges(e.Joined), Cut: toEdges(e.Cut),
		LeafHash: hex.EncodeToString(e.Leaf[:])}
	if e.Kind == ledger.KindSplit {
		cost := e.LogOdds()
		seeds := each(e.Seeds, toIDs)
		out.Cost, out.Seeds = &cost, &seeds
	}
	return out
}

func toEntries(list []ledger.Entry) Entries { return Entries{Items: each(list, toEntry)} }

func toNeuron(n ledger.Neuron) Neuron {
	return Neuron{Name: n.Name, Anchor: n.Anchor.String(), AddedBy: n.AddedBy, AddedAt: n.AddedAt, Segment: n.Segment.String()}
}

func toProposal(p *triage.Proposal) *Proposal {
	if p == nil {
		return nil
	}
	out := &Proposal{Kind: ProposalKind(p.Kind)}
	if p.Kind == triage.ProposeMerge {
		a, b := p.A.String(), p.B.String()
		out.A, out.B = &a, &b
	} else {
		groups := each(p.Groups, toIDs)
		out.Groups = &groups
	}
	return out
}

func toFinding(f triage.Finding) Finding {
	out := Finding{Detector: f.Detector, Family: f.Family, Kind: TaskKind(f.Kind), Key: f.Key, Segments: toIDs(f.Segments), PointNm: toPoint(f.Point),
		Said: f.Said, Probability: f.Probability, Gain: f.Gain, Proposal: toProposal(f.Proposal)}
	if f.ID != 0 {
		id := strconv.FormatInt(f.ID, 10)
		out.Id = &id
	}
	out.Evidence = each(f.Evidence, func(e triage.Evidence) Evidence { return Evidence{Name: e.Name, Value: e.Value, Unit: some(e.Unit)} })
	return out
}

func toClaim(c tasks.Claim) Claim {
	return Claim{Id: c.ID, Task: c.Task, Person: c.Person, At: c.At, Until: c.Until, EndedAt: c.EndedAt, Ended: some(ClaimEnded(c.Ended))}
}

func toTask(t tasks.Task) Task {
	out := Task{Id: t.ID, Number: t.Number, Volume: t.Volume, Key: t.Key, Family: t.Family, Kind: TaskKind(t.Kind), State: TaskState(t.State),
		Segments: toIDs(t.Segments), PointNm: toPoint(t.Point), Said: t.Said, Findings: each(t.Findings, toFinding), Proposal: toProposal(t.Proposal),
		Probability: t.Probability, Gain: t.Gain, Minutes: t.Minutes, Priority: t.Priority, AssignedTo: some(t.AssignedTo), MadeAt: t.MadeAt, Waits: t.Waits}
	if t.Claim != nil {
		c := toClaim(*t.Claim)
		out.Claim = &c
	}
	if r := t.Resolution; r != nil {
		out.Resolution = &Resolution{Outcome: Outcome(r.Outcome), Person: r.Person, At: r.At, Note: r.Note, Position: some(r.Position)}
	}
	if r := t.Review; r != nil {
		out.Review = &Review{Verdict: Verdict(r.Verdict), Person: r.Person, At: r.At, Note: r.Note, Reversal: some(r.Reversal)}
	}
	return out
}

func toDone(t tasks.Task, e *ledger.Entry) TaskDone {
	out := TaskDone{Task: toTask(t)}
	if e != nil {
		entry := toEntry(*e)
		out.Entry = &entry
	}
	return out
}
