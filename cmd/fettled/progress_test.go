package main

import (
	"bytes"
	"testing"
)

func TestProgressIntoALogIsOneLineAStage(t *testing.T) {
	var b bytes.Buffer
	p := newProgress(&b)
	for done := range int64(1000) {
		p.step("sort", done, 1000, "rows")
	}
	p.step("pack", 0, 0, "")
	p.step("pack", 7, 0, "blocks")
	p.end()
	if want := "sort  0 of 1000 rows\npack\n"; b.String() != want {
		t.Errorf("got %q", b.String())
	}
}

func TestProgressOnATerminalIsOneLineRedrawn(t *testing.T) {
	var b bytes.Buffer
	p := &progress{w: &b, terminal: true}
	p.step("sort", 0, 4, "rows")
	p.step("sort", 4, 4, "rows")
	p.end()
	want := "\r\x1b[Ksort                ░░░░░░░░░░░░░░░░░░░░░░░░   0 %  0 of 4 rows" +
		"\r\x1b[Ksort                ████████████████████████ 100 %  4 of 4 rows\n"
	if b.String() != want {
		t.Errorf("got %q", b.String())
	}
}
