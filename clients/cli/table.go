package cli

import (
	"fmt"
	"io"
	"strings"

	"charm.land/lipgloss/v2"
	"charm.land/lipgloss/v2/table"
)

// abbreviated are headings that are much wider than what stands below them.
var abbreviated = map[string]string{"probability": "prob.", "minutes": "min", "position": "pos."}

// gutter is the room between two columns.
const gutter = 2

// drawTable draws a table for a person at a terminal of some width.
func drawTable(w io.Writer, width int, head []string, alignRight []bool, rows [][]string) error {
	if len(rows) == 0 {
		_, err := fmt.Fprintln(w, "none")
		return err
	}
	rows = cleaned(rows)
	short := make([]string, len(head))
	for i, h := range head {
		short[i] = first(abbreviated[h], h)
	}
	fitted := fit(width, append([][]string{short}, rows...))
	t := table.New().Headers(short...).Rows(rows...).
		Border(lipgloss.NormalBorder()).BorderTop(false).BorderBottom(false).BorderLeft(false).BorderRight(false).
		BorderColumn(false).BorderHeader(true).BorderStyle(lipgloss.NewStyle().Faint(true)).
		StyleFunc(func(row, col int) lipgloss.Style {
			s := lipgloss.NewStyle().PaddingRight(gutter).Width(fitted[col] + gutter).Bold(row == table.HeaderRow)
			if alignRight[col] {
				s = s.Align(lipgloss.Right)
			}
			return s
		})
	for line := range strings.Lines(t.String()) {
		if _, err := lipgloss.Fprintln(w, strings.TrimRight(line, " \n")); err != nil {
			return err
		}
	}
	return nil
}

// fit finds the columns' widths. Where the table is wider than the terminal, columns of several words give way, the
// widest first, and never below their longest word: an id or a number is not broken.
func fit(width int, rows [][]string) []int {
	wide, word := make([]int, len(rows[0])), make([]int, len(rows[0]))
	for _, row := range rows {
		for i, cell := range row {
			wide[i] = max(wide[i], lipgloss.Width(cell))
			for _, part := range strings.Fields(cell) {
				word[i] = max(word[i], lipgloss.Width(part))
			}
		}
	}
	over := -width
	for _, n := range wide {
		over += n + gutter
	}
	for ; over > 0; over-- {
		widest := -1
		for i := range wide {
			if wide[i] > word[i] && (widest < 0 || wide[i] > wide[widest]) {
				widest = i
			}
		}
		if widest < 0 {
			break // nothing gives way any more, and the terminal wraps
		}
		wide[widest]--
	}
	return wide
}
