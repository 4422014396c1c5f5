package demo

import (
	"context"
	"fmt"
	"io"
	"strings"
	"text/tabwriter"
	"unicode/utf8"

	"fettle.example/fettle/clients/fettle"
)

// Report tells what the team did, read back from the API: errors before and after, tasks by kind and outcome, people,
// and the top of the ledger.
func (t *Team) Report(ctx context.Context, w io.Writer) error {
	lead, err := t.member(Lead)
	if err != nil {
		return err
	}
	for _, section := range []func(context.Context, io.Writer) error{lead.reportQuality, lead.reportTasks, lead.reportPeople, lead.reportLedger} {
		if err := section(ctx, w); err != nil {
			return err
		}
	}
	return nil
}

// columns writes rows of tab-separated cells below a title: the first column at the left, figures at the right.
func columns(w io.Writer, title string, rows ...string) {
	cells := make([][]string, len(rows))
	var wide []int
	for i, row := range rows {
		cells[i] = strings.Split(row, "\t")
		for j, cell := range cells[i] {
			if j == len(wide) {
				wide = append(wide, 0)
			}
			wide[j] = max(wide[j], utf8.RuneCountInString(cell))
		}
	}
	fmt.Fprintf(w, "\n%s\n", title)
	for _, row := range cells {
		fmt.Fprintf(w, "  %-*s", wide[0], row[0])
		for j, cell := range row[1:] {
			fmt.Fprintf(w, "  %*s", wide[j+1], cell)
		}
		fmt.Fprintln(w)
	}
}

func (m *member) reportQuality(ctx context.Context, w io.Writer) error {
	delivery := "0"
	before, err := fettle.Read[fettle.Quality](m.api.GetQuality(ctx, m.Volume, &fettle.GetQualityParams{At: &delivery}))
	if err != nil {
		return err
	}
	after, err := fettle.Read[fettle.Quality](m.api.GetQuality(ctx, m.Volume, &fettle.GetQualityParams{}))
	if err != nil {
		return err
	}
	columns(w, fmt.Sprintf("Errors against the truth, in the delivery and after %d entries", after.Position),
		"\tdelivered\tnow",
		fmt.Sprintf("false merges\t%d\t%d", before.FalseMerges, after.FalseMerges),
		fmt.Sprintf("false splits\t%d\t%d", before.FalseSplits, after.FalseSplits),
		fmt.Sprintf("variation of information, merged (bits)\t%.4f\t%.4f", before.MergeBits, after.MergeBits),
		fmt.Sprintf("variation of information, split (bits)\t%.4f\t%.4f", before.SplitBits, after.SplitBits),
		fmt.Sprintf("adapted Rand error\t%.4f\t%.4f", before.RandError, after.RandError))
	return nil
}

// outcomes are the ways in which a task can have ended, in the order of the report.
var outcomes = []string{"corrected", "sound", "unclear"}

func (m *member) reportTasks(ctx context.Context, w io.Writer) error {
	counts := map[string]map[string]int{}
	var kinds []string
	limit := 1000
	var cursor *string
	for {
		page, err := fettle.Read[fettle.Tasks](m.api.ListTasks(ctx, m.Volume, &fettle.ListTasksParams{Cursor: cursor, Limit: &limit}))
		if err != nil {
			return err
		}
		for _, task := range page.Items {
			kind := string(task.Kind)
			if counts[kind] == nil {
				counts[kind], kinds = map[string]int{}, append(kinds, kind)
			}
			counts[kind][string(task.State)]++
			if task.Resolution != nil {
				counts[kind][string(task.Resolution.Outcome)]++
			}
		}
		if page.Next == nil {
			break
		}
		cursor = page.Next
	}
	lines := []string{"\t" + strings.Join(outcomes, "\t") + "\taccepted\treturned\tovertaken\tstill open"}
	for _, kind := range kinds {
		line := kind
		for _, what := range append(outcomes, "accepted", "returned", "overtaken", "open") {
			line += fmt.Sprintf("\t%d", counts[kind][what])
		}
		lines = append(lines, line)
	}
	columns(w, "Tasks", lines...)
	return nil
}

func (m *member) reportPeople(ctx context.Context, w io.Writer) error {
	t, err := fettle.Read[fettle.Throughput](m.api.GetThroughput(ctx, m.Volume, &fettle.GetThroughputParams{}))
	if err != nil {
		return err
	}
	lines := []string{"\tresolved\tcorrected\tsound\tunclear\treviewed\taccepted\t95 % interval"}
	for _, d := range t.Items {
		share, interval := "", ""
		if s := d.AcceptedShare; s != nil {
			share, interval = fmt.Sprintf("%.0f %%", 100*s.Value), fmt.Sprintf("%.0f to %.0f %%", 100*s.Low, 100*s.High)
		}
		lines = append(lines, fmt.Sprintf("%s\t%d\t%d\t%d\t%d\t%d\t%s\t%s",
			d.Person, d.Resolved, d.Corrected, d.Sound, d.Unclear, d.Reviewed, share, interval))
	}
	columns(w, "People (simulated)", lines...)
	_, err = fmt.Fprintln(w, t.Notice)
	return err
}

// shown is how many entries the report ends with.
const shown = 6

func (m *member) reportLedger(ctx context.Context, w io.Writer) error {
	newest, limit := "newest", shown
	page, err := fettle.Read[fettle.Entries](m.api.ListEntries(ctx, m.Volume, &fettle.ListEntriesParams{Order: &newest, Limit: &limit}))
	if err != nil {
		return err
	}
	fmt.Fprintf(w, "\nTop of the ledger\n")
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', 0)
	for _, e := range page.Items {
		what := string(e.Kind)
		if e.Reverses != nil {
			what += fmt.Sprintf(" of %d", *e.Reverses)
		}
		fmt.Fprintf(t, "  %d\t%s\t%s\t%s → %s\n", e.Position, e.Person, what, strings.Join(e.Before, " "), strings.Join(e.After, " "))
	}
	return t.Flush()
}
