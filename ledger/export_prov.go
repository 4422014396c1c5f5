package ledger

import (
	"context"
	"fmt"
	"net/url"
)

// provPrefix are the namespaces of a provenance export.
var provPrefix = map[string]string{
	"fet":     "https://fettle.example/terms#",
	"entry":   "https://fettle.example/entry/",
	"seg":     "https://fettle.example/segment/",
	"who":     "https://fettle.example/person/",
	"program": "https://fettle.example/program/",
	"task":    "https://fettle.example/task/",
}

// qualified is a qualified name as a value (PROV-JSON, section 2.3).
type qualified struct {
	Name string `json:"$"`
	Type string `json:"type"`
}

func named(name string) map[string]any {
	return map[string]any{"prov:type": qualified{name, "prov:QUALIFIED_NAME"}}
}

// prov is a document of PROV-JSON (W3C member submission, 24 April 2013) for PROV-DM: sections of records by their name.
type prov struct {
	sections map[string]map[string]any
}

func newProv() *prov { return &prov{sections: make(map[string]map[string]any)} }

func (p *prov) put(section, name string, record any) {
	if p.sections[section] == nil {
		p.sections[section] = make(map[string]any)
	}
	p.sections[section][name] = record
}

// relate adds a relation under the next blank name of its section.
func (p *prov) relate(section string, record map[string]string) {
	p.put(section, fmt.Sprintf("_:%s%d", section, len(p.sections[section])+1), record)
}

// entry tells an entry: an activity that used the segments before it and ended them, and made the ones after it from them. A person
// is answerable for it, also where a program acted on their behalf; a task is its plan. A segment's id names one content, so that it
// needs no version beside it.
func (p *prov) entry(e Entry) {
	activity, at := "entry:"+itoa(e.Position), e.At.UTC().Format(timeLayout)
	record := named("fet:" + e.Kind)
	record["prov:startTime"], record["prov:endTime"] = at, at
	p.put("activity", activity, record)
	for _, id := range e.Before {
		seg := p.segment(id)
		p.relate("used", map[string]string{"prov:activity": activity, "prov:entity": seg})
		p.relate("wasInvalidatedBy", map[string]string{"prov:activity": activity, "prov:entity": seg, "prov:time": at})
	}
	for _, id := range e.After {
		seg := p.segment(id)
		p.relate("wasGeneratedBy", map[string]string{"prov:activity": activity, "prov:entity": seg, "prov:time": at})
		for _, old := range e.Before {
			p.relate("wasDerivedFrom", map[string]string{"prov:generatedEntity": seg, "prov:usedEntity": p.segment(old), "prov:activity": activity})
		}
	}
	p.people(e, activity)
}

func (p *prov) segment(id ID) string {
	name := fmt.Sprintf("seg:%d", uint64(id))
	p.put("entity", name, named("fet:Segment"))
	return name
}

func (p *prov) people(e Entry, activity string) {
	who := "who:" + url.PathEscape(e.Person)
	p.put("agent", who, named("prov:Person"))
	answers := map[string]string{"prov:activity": activity, "prov:agent": who}
	if e.Task != nil {
		task := "task:" + e.Task.String()
		p.put("entity", task, named("prov:Plan"))
		answers["prov:plan"] = task
	}
	p.relate("wasAssociatedWith", answers)
	if e.Agent != "" {
		program := "program:" + url.PathEscape(e.Agent)
		p.put("agent", program, named("prov:SoftwareAgent"))
		p.relate("actedOnBehalfOf", map[string]string{"prov:delegate": program, "prov:responsible": who, "prov:activity": activity})
	}
}

// document is the sections beside the namespaces.
func (p *prov) document() map[string]any {
	out := map[string]any{"prefix": provPrefix}
	for name, records := range p.sections {
		out[name] = records
	}
	return out
}

// provPage is how many entries are read at once.
const provPage = 1000

// Provenance tells who made which segments of which, as a document of PROV-JSON. It names people. Memory O(entries).
func (v *Volume) Provenance(ctx context.Context) (map[string]any, error) {
	p := newProv()
	for after := int64(0); ; {
		entries, err := v.Entries(ctx, Filter{After: after, Limit: provPage})
		if err != nil {
			return nil, err
		}
		for _, e := range entries {
			p.entry(e)
			after = e.Position
		}
		if len(entries) < provPage {
			return p.document(), nil
		}
	}
}
