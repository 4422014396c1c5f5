package base

import (
	"fmt"
	"slices"
	"strings"

	"fettle.example/fettle/internal/fault"
)

// Problem is one thing that is wrong with a delivery.
type Problem struct {
	Table  string // "supervoxels", "contacts", …, or "volume.json"
	Line   int64  // of the file, from 1, header included; in Parquet the row, from 1; 0 when it concerns the whole table
	Column string // empty when it concerns the whole line
	Value  string // as delivered; empty when there is none
	Reason string
}

func (p Problem) String() string {
	var b strings.Builder
	b.WriteString(p.Table)
	if p.Line > 0 {
		fmt.Fprintf(&b, " line %d", p.Line)
	}
	if p.Column != "" {
		fmt.Fprintf(&b, ", %s", p.Column)
	}
	if p.Value != "" {
		fmt.Fprintf(&b, " %q", p.Value)
	}
	return b.String() + ": " + p.Reason
}

// Refusal is why a delivery was not imported. Nothing of it was stored.
type Refusal struct {
	Problems []Problem // the first 20
	More     int       // found beyond those
}

func (r *Refusal) Error() string {
	lines := []string{r.fault().Message}
	for _, p := range r.Problems {
		lines = append(lines, "  "+p.String())
	}
	if r.More > 0 {
		lines = append(lines, fmt.Sprintf("  and %d more", r.More))
	}
	return strings.Join(lines, "\n")
}

// Unwrap gives the fault: Invalid, "delivery-refused".
func (r *Refusal) Unwrap() error { return r.fault() }

func (r *Refusal) fault() *fault.Error {
	n := len(r.Problems) + r.More
	s := "s"
	if n == 1 {
		s = ""
	}
	return fault.Newf(fault.Invalid, "delivery-refused", "the delivery has %d problem%s and nothing of it was stored", n, s).
		WithNext("correct the tables and import again")
}

// problemsKept is how many problems a refusal names; the rest are counted.
const problemsKept = 20

// problems gathers what is wrong while reading goes on.
type problems struct {
	kept []Problem
	more int
}

func (p *problems) add(table string, line int64, column, value, reason string) {
	if len(p.kept) == problemsKept {
		p.more++
		return
	}
	p.kept = append(p.kept, Problem{table, line, column, clip(value), reason})
}

func (p *problems) any() bool { return len(p.kept) > 0 }

// refusal is nil when all is well. Problems come in the order of the tables and of their lines.
func (p *problems) refusal() error {
	if !p.any() {
		return nil
	}
	slices.SortStableFunc(p.kept, func(a, b Problem) int {
		if a.Table != b.Table {
			return tableOrder(a.Table) - tableOrder(b.Table)
		}
		return int(min(1, max(-1, a.Line-b.Line)))
	})
	return &Refusal{Problems: p.kept, More: p.more}
}
