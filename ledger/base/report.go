package base

import (
	"fmt"
	"time"
)

// ImportOptions are the choices of whoever imports.
type ImportOptions struct {
	Name     string         // instead of the name in volume.json
	Progress func(Progress) // told now and then, never by two goroutines at once; may be nil
	TempDir  string         // where sorting may keep files, as large as the contacts; the system's when empty
}

// Progress is how far an import has come.
type Progress struct {
	Stage       string // "reading contacts", "arranging", "storing" …
	Done, Total int64  // Total 0: not known
	Unit        string // "bytes", "supervoxels"
}

// Report is what an import did.
type Report struct {
	Info     Info
	Warnings []string // what was odd but usable
	Elapsed  time.Duration
}

// plural counts things in words.
func plural(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return fmt.Sprint(n, " ", many)
}
