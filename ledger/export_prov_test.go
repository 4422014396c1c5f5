package ledger

import (
	"encoding/json"
	"maps"
	"os"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"github.com/google/uuid"
)

type provFile map[string]map[string]any

func readProv(t *testing.T, text []byte) provFile {
	t.Helper()
	var f provFile
	if err := json.Unmarshal(text, &f); err != nil {
		t.Fatal(err)
	}
	return f
}

// TestProvenanceIsThatOfTheExample tells the split of checks/prov_split_example.json, which python3-prov 2.0.0 reads, and compares
// section by section: as many records, with the same attributes. The example counts supervoxels beside; ours doesn't.
func TestProvenanceIsThatOfTheExample(t *testing.T) {
	text, err := os.ReadFile("../testdata/checks/prov_split_example.json")
	if err != nil {
		t.Fatal(err)
	}
	task := uuid.MustParse("017f22e2-79b0-7cc3-98c4-dc0c0c07398f")
	p := newProv()
	p.entry(Entry{Position: 42, Kind: KindSplit, Person: "p17", Agent: "cli 1", Task: &task, At: time.Date(2024, 5, 1, 9, 3, 20, 0, time.UTC),
		Before: []ID{864}, After: []ID{901, 902}})
	ours, err := json.Marshal(p.document())
	if err != nil {
		t.Fatal(err)
	}
	got, want := readProv(t, ours), readProv(t, text)
	delete(got, "prefix")
	delete(want, "prefix")
	if diff := cmp.Diff(shape(want), shape(got)); diff != "" {
		t.Error(diff)
	}
}

// shape lists the attributes of each section's records.
func shape(f provFile) map[string][]string {
	out := make(map[string][]string)
	for section, records := range f {
		for _, r := range records {
			keys := slices.Sorted(maps.Keys(r.(map[string]any)))
			keys = slices.DeleteFunc(keys, func(k string) bool { return k == "fet:supervoxelCount" })
			out[section] = append(out[section], strings.Join(keys, " "))
		}
		slices.Sort(out[section])
	}
	return out
}

// TestProvenanceHangsTogether holds that every name in a relation is that of a record, and every prefix is declared.
func TestProvenanceHangsTogether(t *testing.T) {
	p := newProv()
	at := time.Date(2026, 3, 1, 9, 30, 0, 0, time.UTC)
	p.entry(Entry{Position: 1, Kind: KindMerge, Person: "alder", At: at, Before: []ID{1, ^ID(0)}, After: []ID{900}})
	p.entry(Entry{Position: 2, Kind: KindReversal, Reverses: 1, Person: "birch", Agent: "fettle", At: at, Before: []ID{900}, After: []ID{901, 902}})
	text, err := json.Marshal(p.document())
	if err != nil {
		t.Fatal(err)
	}
	f := readProv(t, text)
	known := make(map[string]bool)
	for _, section := range []string{"entity", "activity", "agent"} {
		for name := range f[section] {
			known[name] = true
			if prefix, _, _ := strings.Cut(name, ":"); f["prefix"][prefix] == nil {
				t.Errorf("the prefix of %s is not declared", name)
			}
		}
	}
	if len(known) != 5+2+3 || !known["seg:18446744073709551615"] {
		t.Errorf("records: %v", known)
	}
	for _, section := range []string{"used", "wasGeneratedBy", "wasInvalidatedBy", "wasDerivedFrom", "wasAssociatedWith", "actedOnBehalfOf"} {
		if len(f[section]) == 0 {
			t.Errorf("no %s", section)
		}
		for blank, r := range f[section] {
			if !strings.HasPrefix(blank, "_:") {
				t.Errorf("%s is no blank name", blank)
			}
			for key, name := range r.(map[string]any) {
				if key != "prov:time" && !known[name.(string)] {
					t.Errorf("%s of %s is %v, which is not told of", key, blank, name)
				}
			}
		}
	}
}
