package cli

import (
	"bytes"
	"strings"
	"testing"

	"charm.land/lipgloss/v2"
	"github.com/google/go-cmp/cmp"
)

func TestTablesFitTheTerminalAndBreakNoID(t *testing.T) {
	head := []string{"task", "person", "segments", "said"}
	rows := [][]string{
		{"7", "alder", "18446744073709551615 4294967296", "a part with 84 inputs and no output hangs on one with 56 and 82"},
		{"12", "birch", "300", "2 nuclei"},
	}
	var b bytes.Buffer
	if err := drawTable(&b, 70, head, []bool{true, false, false, false}, rows); err != nil {
		t.Fatal(err)
	}
	want := `task  person  segments                    said
──────────────────────────────────────────────────────────────────────
   7  alder   18446744073709551615        a part with 84 inputs and
              4294967296                  no output hangs on one
                                          with 56 and 82
  12  birch   300                         2 nuclei
`
	if d := cmp.Diff(want, b.String()); d != "" {
		t.Error(d)
	}
	for line := range strings.Lines(b.String()) {
		if n := lipgloss.Width(strings.TrimRight(line, "\n")); n > 70 {
			t.Errorf("%d wide: %s", n, line)
		}
	}
}

func TestAWideIDDoesNotKeepOthersFromGivingWay(t *testing.T) {
	rows := [][]string{{"18446744073709551615", "a few words that can stand below each other"}}
	var b bytes.Buffer
	if err := drawTable(&b, 45, []string{"segment", "said"}, []bool{true, false}, rows); err != nil {
		t.Fatal(err)
	}
	want := `             segment  said
─────────────────────────────────────────────
18446744073709551615  a few words that can
                      stand below each
                      other
`
	if d := cmp.Diff(want, b.String()); d != "" {
		t.Error(d)
	}
}

func TestAnEmptyTableSaysSo(t *testing.T) {
	var b bytes.Buffer
	if err := drawTable(&b, 70, []string{"task"}, []bool{true}, nil); err != nil || b.String() != "none\n" {
		t.Errorf("%q, %v", b.String(), err)
	}
}

func TestNumbersKeepWhatMatters(t *testing.T) {
	for _, c := range []struct {
		x    float64
		want string
	}{{2, "2"}, {2.0118, "2.01"}, {0, "0"}, {0.00034, "0.00034"}, {1.5e-9, "1.5e-09"}, {-3.667, "-3.67"}, {123027.93, "123028"}} {
		if got := number(c.x, 2); got != c.want {
			t.Errorf("%v: %s, want %s", c.x, got, c.want)
		}
	}
	if thousands(1234567) != "1 234 567" || thousands(-123) != "-123" || thousands(12) != "12" {
		t.Errorf("%s %s %s", thousands(1234567), thousands(-123), thousands(12))
	}
}
