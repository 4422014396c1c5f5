package cli

import (
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
	"time"
	"unicode"

	"charm.land/lipgloss/v2"
	"golang.org/x/term"
)

// Forms of output.
const (
	asTable = "table"
	asJSON  = "json"
	asCSV   = "csv"
)

// column is one column of a list: its heading, how an item reads in it, and whether it lines up at the right, as
// numbers do.
type column[T any] struct {
	name  string
	right bool
	text  func(T) string
}

func left[T any](name string, text func(T) string) column[T]  { return column[T]{name, false, text} }
func right[T any](name string, text func(T) string) column[T] { return column[T]{name, true, text} }

// list prints items in the form that was asked for. JSON is the items as the API gave them.
func list[T any](a *app, items []T, columns ...column[T]) error {
	if a.output == asJSON {
		if items == nil {
			items = []T{}
		}
		return writeJSON(a.Out, items)
	}
	rows := make([][]string, len(items))
	for i, item := range items {
		for _, c := range columns {
			rows[i] = append(rows[i], c.text(item))
		}
	}
	head := make([]string, len(columns))
	alignRight := make([]bool, len(columns))
	for i, c := range columns {
		head[i], alignRight[i] = c.name, c.right
	}
	switch {
	case a.output == asCSV:
		return writeCSV(a.Out, head, rows)
	case a.terminal():
		return drawTable(a.Out, a.width(), head, alignRight, rows)
	}
	return writeTabs(a.Out, head, rows)
}

// field is one line of a record.
type field struct{ name, value string }

// record prints one thing: as lines of name and value, as JSON as the API gave it, or as CSV of one row.
func record(a *app, value any, fields ...field) error {
	switch a.output {
	case asJSON:
		return writeJSON(a.Out, value)
	case asCSV:
		var head, row []string
		for _, f := range fields {
			head, row = append(head, f.name), append(row, f.value)
		}
		return writeCSV(a.Out, head, [][]string{row})
	}
	return a.lines(a.Out, fields)
}

// lines writes names and values one below the other, those without a value left out.
func (a *app) lines(w io.Writer, fields []field) error {
	wide := 0
	for _, f := range fields {
		wide = max(wide, len(f.name))
	}
	for _, f := range fields {
		if f.value == "" {
			continue
		}
		name := f.name + strings.Repeat(" ", wide-len(f.name))
		if _, err := lipgloss.Fprintf(w, "%s  %s\n", lipgloss.NewStyle().Faint(true).Render(name), clean(f.value)); err != nil {
			return err
		}
	}
	return nil
}

func writeJSON(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetIndent("", "  ")
	e.SetEscapeHTML(false)
	return e.Encode(v)
}

func writeCSV(w io.Writer, head []string, rows [][]string) error {
	c := csv.NewWriter(w)
	if err := c.Write(underscored(head)); err != nil {
		return err
	}
	return c.WriteAll(rows)
}

// underscored makes headings into names that need no quotes anywhere.
func underscored(head []string) []string {
	out := make([]string, len(head))
	for i, h := range head {
		out[i] = strings.ReplaceAll(h, " ", "_")
	}
	return out
}

// writeTabs writes lines for cut, sort and awk: a tab between values, none inside.
func writeTabs(w io.Writer, head []string, rows [][]string) error {
	for _, row := range append([][]string{head}, cleaned(rows)...) {
		if _, err := fmt.Fprintln(w, strings.Join(row, "\t")); err != nil {
			return err
		}
	}
	return nil
}

// clean makes a space of every control character: a note that somebody else wrote must not move our cursor, colour
// our screen or break a line.
func clean(s string) string {
	return strings.Map(func(r rune) rune {
		if unicode.IsControl(r) {
			return ' '
		}
		return r
	}, s)
}

func cleaned(rows [][]string) [][]string {
	out := make([][]string, len(rows))
	for i, row := range rows {
		for _, cell := range row {
			out[i] = append(out[i], clean(cell))
		}
	}
	return out
}

// terminal says whether a person is looking at standard output.
func (a *app) terminal() bool { return a.width() > 0 }

// width is that of the terminal in characters, 0 when there is none.
func (a *app) width() int {
	f, ok := a.Out.(*os.File)
	if !ok || !term.IsTerminal(int(f.Fd())) {
		return 0
	}
	w, _, err := term.GetSize(int(f.Fd()))
	if err != nil || w <= 0 {
		return 80
	}
	return w
}

// when writes a time: short and local for a person at a terminal, RFC 3339 in UTC for everything else.
func (a *app) when(t time.Time) string {
	switch {
	case t.IsZero():
		return ""
	case a.output == asTable && a.terminal():
		return t.Local().Format("2006-01-02 15:04:05")
	}
	return t.UTC().Format(time.RFC3339)
}

// number writes a measure with at most so many decimals: none from 100 on, and with digits that count where so many
// would show nothing.
func number(x float64, decimals int) string {
	if math.Abs(x) >= 100 {
		decimals = 0
	}
	if x != 0 && math.Abs(x) < math.Pow(10, -float64(decimals)) {
		return strconv.FormatFloat(x, 'g', 2, 64)
	}
	s := strconv.FormatFloat(x, 'f', decimals, 64)
	if strings.Contains(s, ".") {
		s = strings.TrimRight(strings.TrimRight(s, "0"), ".")
	}
	return s
}

// fixed writes a measure with so many decimals, for columns that line up.
func fixed(x float64, decimals int) string { return strconv.FormatFloat(x, 'f', decimals, 64) }

// percent writes a share.
func percent(x float64) string { return strconv.FormatFloat(100*x, 'f', 0, 64) + " %" }

// notices is where a remark goes that is not part of a table: below it for people, aside for programs.
func (a *app) notices() io.Writer {
	if a.output == asTable {
		return a.Out
	}
	return a.Err
}
