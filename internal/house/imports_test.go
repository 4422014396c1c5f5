package house

import (
	"encoding/json"
	"errors"
	"io"
	"maps"
	"os/exec"
	"slices"
	"strings"
	"testing"
)

const module = "fettle.example/fettle"

// rule says what one room may use. A room that is not named in rooms fails the test: whoever builds one decides here
// what it may use, and why.
type rule struct {
	uses    []string // rooms of ours that it may import
	never   []string // packages that it must not reach, even through others
	because string
}

// everything is for the programs, which join the rooms.
var everything = []string{"*"}

const (
	driver = "github.com/jackc/pgx/v5"
	echo   = "github.com/labstack/echo/v4"
	jobs   = "github.com/riverqueue/river"
)

var rooms = map[string]rule{
	"internal/fault": {never: []string{driver, echo, "net/http"},
		because: "kinds of failure are for every edge, so they know none"},
	"internal/stats": {never: []string{driver, echo, "net/http"},
		because: "formulas must be checkable with a pencil"},
	"internal/pg": {uses: []string{"internal/fault"}, never: []string{echo, jobs},
		because: "the way to PostgreSQL knows no table"},
	"internal/pgserver": {uses: []string{"internal/fault"}, never: []string{echo, jobs},
		because: "a server knows nothing of what is in it"},
	"migrations": {uses: []string{"internal/fault", "internal/pg"}, never: []string{echo},
		because: "the tables stand before every room that reads them"},
	"internal/pgtest": {uses: []string{"internal/pg", "internal/pgserver", "migrations"},
		because: "a test database knows no subject, or the ledger's own tests would import in a circle"},

	"ledger/cut": {uses: []string{"internal/fault"}, never: []string{driver, echo, "net/http"},
		because: "a cut must be checkable and fuzzable without a database"},
	"ledger/proof": {uses: []string{"internal/fault"}, never: []string{driver, echo, "net/http"},
		because: "a proof must be checkable by somebody who has only the export"},
	"ledger/base": {uses: []string{"internal/fault", "internal/pg"}, never: []string{echo, jobs},
		because: "what was delivered does not know what people said later"},
	"ledger": {uses: []string{"internal/fault", "internal/pg", "ledger/base", "ledger/cut", "ledger/proof"}, never: []string{echo, jobs},
		because: "the truth does not know who reads it"},
	"ledger/ledgertest": {uses: []string{"internal/fault", "internal/pg", "internal/pgtest", "internal/synth", "ledger", "ledger/base", "migrations"},
		because: "it helps the tests of every room above the ledger"},

	"triage": {uses: []string{"internal/fault", "internal/pg", "internal/stats", "ledger", "ledger/base", "ledger/cut"}, never: []string{echo, jobs},
		because: "a detector must not know who will work on what it finds"},
	"tasks": {uses: []string{"internal/fault", "internal/pg", "internal/stats", "ledger", "ledger/base", "triage"}, never: []string{echo, jobs},
		because: "human work is the same by HTTP, by a job, or in a test"},
	"worker": {uses: []string{"internal/fault", "internal/pg", "ledger", "migrations", "tasks", "triage"}, never: []string{echo},
		because: "background work and HTTP meet in the daemon only; the migrations say where River's tables are"},
	"api": {uses: []string{"internal/fault", "internal/pg", "ledger", "ledger/base", "ledger/proof", "tasks", "triage"}, never: []string{jobs},
		because: "background work and HTTP meet in the daemon only"},

	"clients/fettle": {uses: []string{"internal/fault"}, never: []string{driver, echo},
		because: "others import the client, so it is light"},
	"clients/cli": {uses: []string{"clients/fettle", "internal/fault", "ledger/proof"}, never: []string{driver, echo},
		because: "the command line can do nothing that the API can't"},

	"internal/synth": {uses: []string{"internal/fault"}, never: []string{driver, echo},
		because: "an invented volume is files, as a real delivery is"},
	"internal/demo": {uses: []string{"clients/fettle", "internal/fault", "internal/synth"}, never: []string{driver, echo},
		because: "the simulated team has only what a real team has: the API"},
	"internal/house": {because: "it has no code"},
	"cmd/fettle":     {uses: []string{"clients/cli"}, never: []string{driver, echo}, because: "ten lines"},
	"cmd/fettled":    {uses: everything, because: "the daemon joins the rooms"},
}

// forTests are the rooms that only test files and each other may use; no other code of ours may know about testing.
var forTests = []string{"internal/pgtest", "ledger/ledgertest"}

// listed is what `go list -json` says of a package.
type listed struct {
	ImportPath string
	Imports    []string
	Deps       []string
}

func TestRoomsUseOnlyWhatTheyMay(t *testing.T) {
	seen := map[string]bool{}
	for _, p := range list(t) {
		room := strings.TrimPrefix(p.ImportPath, module+"/")
		seen[room] = true
		r, ok := rooms[room]
		if !ok {
			t.Errorf("%s is not in the table of rooms: say what it may use, and why", room)
			continue
		}
		for _, used := range p.Imports {
			used, ours := strings.CutPrefix(used, module+"/")
			if ours && !slices.Contains(r.uses, used) && !slices.Equal(r.uses, everything) {
				t.Errorf("%s must not use %s: %s", room, used, r.because)
			}
		}
		for _, banned := range r.never {
			if reached(p.Deps, banned) {
				t.Errorf("%s must not reach %s, even through others: %s", room, banned, r.because)
			}
		}
	}
	for _, room := range slices.Sorted(maps.Keys(rooms)) {
		if !seen[room] {
			t.Errorf("%s has vanished: take it out of the table", room)
		}
	}
}

// What helps tests is not part of any program.
func TestProgramsKnowNothingOfTesting(t *testing.T) {
	for _, p := range list(t) {
		room := strings.TrimPrefix(p.ImportPath, module+"/")
		if slices.Contains(forTests, room) {
			continue
		}
		for _, used := range p.Imports {
			if used == "testing" || slices.Contains(forTests, strings.TrimPrefix(used, module+"/")) {
				t.Errorf("%s uses %s outside its tests", room, used)
			}
		}
	}
}

// The table itself must not run in a circle or upwards: what a room may use stands, and may not use the room.
func TestTableRunsDownwards(t *testing.T) {
	var below func(room string, path []string)
	below = func(room string, path []string) {
		if slices.Contains(path, room) {
			t.Fatalf("the table runs in a circle: %s", strings.Join(append(path, room), " → "))
		}
		for _, used := range rooms[room].uses {
			if _, ok := rooms[used]; !ok && used != "*" {
				t.Errorf("%s may use %s, which is not in the table", room, used)
			}
			below(used, append(path, room))
		}
	}
	for room := range rooms {
		below(room, nil)
	}
}

// reached says whether a package, or one below it, is among those that another needs.
func reached(deps []string, banned string) bool {
	return slices.ContainsFunc(deps, func(d string) bool { return d == banned || strings.HasPrefix(d, banned+"/") })
}

func list(t *testing.T) []listed {
	t.Helper()
	cmd := exec.Command("go", "list", "-e", "-json=ImportPath,Imports,Deps", module+"/...")
	cmd.Dir = "../.."
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	var all []listed
	for d := json.NewDecoder(strings.NewReader(string(out))); ; {
		var p listed
		if err := d.Decode(&p); errors.Is(err, io.EOF) {
			return all
		} else if err != nil {
			t.Fatal(err)
		}
		all = append(all, p)
	}
}
