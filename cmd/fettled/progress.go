package main

import (
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"golang.org/x/term"
)

// progress tells how far a long step has come: a line that is redrawn on a terminal, and elsewhere a line when a
// step begins and then every few seconds, so that a log stays readable.
type progress struct {
	w        io.Writer
	terminal bool
	stage    string
	began    time.Time
	drawn    time.Time
	open     bool // a line of the terminal waits for its end
}

// How often to draw.
const (
	redrawEvery = 100 * time.Millisecond
	linesEvery  = 5 * time.Second
)

func newProgress(w io.Writer) *progress {
	f, ok := w.(*os.File)
	return &progress{w: w, terminal: ok && term.IsTerminal(int(f.Fd()))}
}

// step tells that done of total units of a stage are done; total 0 is unknown.
func (p *progress) step(stage string, done, total int64, unit string) {
	now := time.Now()
	every := linesEvery
	if p.terminal {
		every = redrawEvery
	}
	last := total > 0 && done >= total
	fresh := stage != p.stage
	if fresh {
		p.end()
		p.stage, p.began = stage, now
	}
	if !fresh && now.Sub(p.drawn) < every && !(last && p.terminal) {
		return
	}
	p.drawn = now
	line := p.line(done, total, unit, now)
	if p.terminal {
		p.open = true
		fmt.Fprintf(p.w, "\r\x1b[K%s", line)
		return
	}
	fmt.Fprintln(p.w, line)
}

func (p *progress) line(done, total int64, unit string, now time.Time) string {
	if total <= 0 {
		if done == 0 {
			return p.stage
		}
		return fmt.Sprintf("%s  %d %s", p.stage, done, unit)
	}
	const cells = 24
	share := min(float64(done)/float64(total), 1)
	full := int(share * cells)
	bar := strings.Repeat("█", full) + strings.Repeat("░", cells-full)
	if !p.terminal {
		return fmt.Sprintf("%s  %d of %d %s", p.stage, done, total, unit)
	}
	left := ""
	if took := now.Sub(p.began); share > 0 && share < 1 && took > 2*time.Second {
		left = fmt.Sprintf("  %s left", time.Duration(float64(took)*(1-share)/share).Round(time.Second))
	}
	return fmt.Sprintf("%-19s %s %3.0f %%  %d of %d %s%s", p.stage, bar, 100*share, done, total, unit, left)
}

// end finishes the line of a terminal.
func (p *progress) end() {
	if p.open {
		fmt.Fprintln(p.w)
		p.open = false
	}
}
