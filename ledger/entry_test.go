package ledger

import (
	"encoding/hex"
	"flag"
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/google/uuid"
)

var update = flag.Bool("update", false, "rewrite golden files")

// TestEntryBytesAreFrozen holds the bytes that are hashed against files that never change. When this fails, the change is
// wrong: entries that were posted before it could no longer be checked.
func TestEntryBytesAreFrozen(t *testing.T) {
	task := uuid.MustParse("017f22e2-79b0-7cc3-98c4-dc0c0c07398f") // the example of RFC 9562, appendix A.6
	at := time.Date(2026, 3, 1, 9, 30, 0, 123456000, time.UTC)
	const most = ^ID(0)
	for name, e := range map[string]Entry{
		"merge": {
			Volume: "cricket-ganglion", Position: 1, ID: task, Kind: KindMerge, Person: "alder", At: at, Reason: "one neurite",
			Before: []ID{1 << 63, 1<<53 + 1}, After: []ID{900}, Joined: Edges{Links: [][2]ID{{most, 7}}},
		},
		"split": {
			Volume: "cricket-ganglion", Position: 2, ID: task, Kind: KindSplit, Person: "birch", Agent: "fettle 1", At: at, Task: &task,
			Reason: "two somata; é, \", \\ and <tags> & signs stay as they are", Before: []ID{900}, After: []ID{901, 902},
			Seeds: [][]ID{{7}, {most, 8}}, Cut: Edges{Contacts: [][2]ID{{7, 8}}, Links: [][2]ID{{most, 7}}}, Cost: 13_815_511,
		},
		"reversal": {
			Volume: "cricket-ganglion", Position: 3, ID: task, Kind: KindReversal, Person: "rowan", At: at, Reverses: 2,
			Before: []ID{901, 902}, After: []ID{903}, Joined: Edges{Contacts: [][2]ID{{7, 8}}, Links: [][2]ID{{most, 7}}},
		},
	} {
		t.Run(name, func(t *testing.T) {
			if err := e.seal("00ff"); err != nil {
				t.Fatal(err)
			}
			got := string(e.Content) + "\n" + hex.EncodeToString(e.Leaf[:]) + "\n"
			file := filepath.Join("testdata", "entry-"+name+".golden")
			if *update {
				if err := os.WriteFile(file, []byte(got), 0o644); err != nil {
					t.Fatal(err)
				}
			}
			want, err := os.ReadFile(file)
			if err != nil {
				t.Fatal(err)
			}
			if got != string(want) {
				t.Errorf("the bytes changed:\n%s\nwere\n%s", got, want)
			}
		})
	}
}
