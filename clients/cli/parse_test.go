package cli

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"fettle.example/fettle/internal/fault"
)

func TestIDsKeepEveryBit(t *testing.T) {
	// 2^53+1 and above do not survive a double; 2^63 and above not a signed integer.
	for _, word := range []string{"0", "9007199254740993", "9223372036854775808", "18446744073709551615"} {
		if got, err := parseID(word); err != nil || got != word {
			t.Errorf("%s: %s, %v", word, got, err)
		}
	}
	for _, word := range []string{"", "-1", "+1", "01", "1e3", "0x10", " 1", "18446744073709551616", "one"} {
		if got, err := parseID(word); fault.KindOf(err) != fault.Invalid {
			t.Errorf("%q: %s, %v", word, got, err)
		}
	}
}

func TestGroupsMixIDsAndPoints(t *testing.T) {
	got, err := parseGroup("12,@100,200.5,-3,13")
	if err != nil {
		t.Fatal(err)
	}
	want := []seed{{id: "12"}, {point: &[3]float64{100, 200.5, -3}}, {id: "13"}}
	if d := cmp.Diff(want, got, cmp.AllowUnexported(seed{})); d != "" {
		t.Error(d)
	}
	for _, bad := range []string{"", "12,", "@1,2", "@1,2,x", "12,,13"} {
		if got, err := parseGroup(bad); fault.KindOf(err) != fault.Invalid {
			t.Errorf("%q: %v, %v", bad, got, err)
		}
	}
}

func TestAtIsAPositionOrATime(t *testing.T) {
	position, moment, err := parseAt("12")
	if err != nil || moment != nil || *position != 12 {
		t.Errorf("12: %v %v %v", position, moment, err)
	}
	position, moment, err = parseAt("2026-12-01T09:30:00Z")
	if err != nil || position != nil || !moment.Equal(time.Date(2026, 12, 1, 9, 30, 0, 0, time.UTC)) {
		t.Errorf("a time: %v %v %v", position, moment, err)
	}
	_, moment, err = parseAt("2026-12-01 09:30")
	if err != nil || !moment.Equal(time.Date(2026, 12, 1, 9, 30, 0, 0, time.Local)) {
		t.Errorf("a local time: %v %v", moment, err)
	}
	if _, _, err := parseAt("yesterday"); fault.KindOf(err) != fault.Invalid {
		t.Errorf("yesterday: %v", err)
	}
}

func TestIDsComeFromTheFirstColumnOfATable(t *testing.T) {
	write := func(text string) string {
		path := filepath.Join(t.TempDir(), "ids.csv")
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	a := &app{Streams: Streams{In: strings.NewReader("7\n8\n")}}
	for _, c := range []struct {
		path string
		want []string
	}{
		{write("\ufeffsupervoxel,x\r\n18446744073709551615,1\r\n12,2\r\n"), []string{"18446744073709551615", "12"}},
		{write("1\n2\n"), []string{"1", "2"}},
		{write(""), nil},
		{"-", []string{"7", "8"}},
	} {
		got, err := a.readIDs(c.path)
		if err != nil {
			t.Error(err)
		}
		if d := cmp.Diff(c.want, got); d != "" {
			t.Error(d)
		}
	}
	_, err := a.readIDs(write("1\n2\nthree\n"))
	if fault.KindOf(err) != fault.Invalid || !strings.Contains(err.Error(), "line 3") {
		t.Errorf("a word among ids: %v", err)
	}
}
