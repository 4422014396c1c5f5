package main

import (
	"bufio"
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"runtime/debug"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"fettle.example/fettle/internal/pgtest"
)

// programs are the two commands, built as they are delivered.
func programs(t *testing.T) (fettle, fettled string) {
	t.Helper()
	dir := t.TempDir()
	args := []string{"build", "-buildvcs=false", "-o", dir + "/"}
	if info, ok := debug.ReadBuildInfo(); ok {
		for _, s := range info.Settings {
			if s.Key == "-race" && s.Value == "true" {
				args = append(args, "-race") // shares what this test was compiled from, and looks for races there too
			}
		}
	}
	build := exec.Command("go", append(args, "fettle.example/fettle/cmd/fettle", "fettle.example/fettle/cmd/fettled")...)
	if out, err := build.CombinedOutput(); err != nil {
		t.Fatalf("go build: %v\n%s", err, out)
	}
	return filepath.Join(dir, "fettle"), filepath.Join(dir, "fettled")
}

// day is a lab's day: one database, one server, and people with their tokens.
type day struct {
	*testing.T
	fettle, fettled string
	env             []string
	tokens          map[string]string
}

// operate runs fettled; it must end well.
func (d *day) operate(args ...string) string {
	d.Helper()
	return d.command(0, d.env, d.fettled, args...)
}

// as runs fettle in a person's name; it must end well.
func (d *day) as(person string, args ...string) string {
	d.Helper()
	return d.refused(0, person, args...)
}

// refused runs fettle in a person's name and wants an exit code. What it said follows what it printed.
func (d *day) refused(code int, person string, args ...string) string {
	d.Helper()
	return d.command(code, append(d.env, "FETTLE_TOKEN="+d.tokens[person]), d.fettle, args...)
}

func (d *day) command(code int, env []string, program string, args ...string) string {
	d.Helper()
	cmd := exec.CommandContext(d.Context(), program, args...)
	cmd.Env = env
	var out, errs bytes.Buffer
	cmd.Stdout, cmd.Stderr = &out, &errs
	err := cmd.Run()
	got := 0
	var exit *exec.ExitError
	if errors.As(err, &exit) {
		got = exit.ExitCode()
	} else if err != nil {
		d.Fatal(err)
	}
	if got != code {
		d.Fatalf("%s %s: exit code %d, want %d\n%s%s", filepath.Base(program), strings.Join(args, " "), got, code, &out, &errs)
	}
	if code != 0 {
		return out.String() + errs.String()
	}
	return out.String()
}

// says wants some words, in any order, in what was printed.
func (d *day) says(out string, words ...string) {
	d.Helper()
	for _, w := range words {
		if !strings.Contains(out, w) {
			d.Errorf("%q is not in\n%s", w, out)
		}
	}
}

// read decodes what a command prints with -o json.
func (d *day) read(v any, person string, args ...string) {
	d.Helper()
	out := d.as(person, append(args, "-o", "json")...)
	if err := json.Unmarshal([]byte(out), v); err != nil {
		d.Fatalf("%s: %v\n%s", strings.Join(args, " "), err, out)
	}
}

// followed waits until findings and tasks have read every entry.
func (d *day) followed() {
	d.Helper()
	ctx, cancel := context.WithTimeout(d.Context(), time.Minute)
	defer cancel()
	look := time.NewTicker(100 * time.Millisecond)
	defer look.Stop()
	for ; ctx.Err() == nil; <-look.C {
		var v struct {
			Position       int64
			Tasks_position int64
		}
		d.read(&v, "rowan", "volume")
		if v.Tasks_position >= v.Position {
			return
		}
	}
	d.Fatal("the tasks did not follow the ledger")
}

// start runs a daemon until the function it returns is called, which asks it to stop and wants a good end. What it
// says first begins with some words; the rest of that line is returned.
func (d *day) start(words string, args ...string) (rest string, stop func()) {
	d.Helper()
	cmd := exec.Command(d.fettled, args...)
	cmd.Env = d.env
	cmd.Stderr = d.Output()
	out, err := cmd.StdoutPipe()
	if err != nil {
		d.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		d.Fatal(err)
	}
	ended := false
	d.Cleanup(func() {
		if !ended {
			cmd.Process.Kill()
			cmd.Wait()
		}
	})
	line, err := bufio.NewReader(out).ReadString('\n')
	rest, ok := strings.CutPrefix(strings.TrimSpace(line), words)
	if !ok {
		d.Fatalf("fettled %s: %q, %v", strings.Join(args, " "), line, err)
	}
	return rest, func() {
		d.Helper()
		ended = true
		if err := errors.Join(cmd.Process.Signal(syscall.SIGTERM), cmd.Wait()); err != nil {
			d.Errorf("fettled %s did not end well: %v", args[0], err)
		}
	}
}

// A day, from an empty database to reconciled books, through the programs that people run.
func TestADay(t *testing.T) {
	t.Parallel()
	d := &day{T: t, tokens: map[string]string{}}
	d.fettle, d.fettled = programs(t)
	d.env = []string{"PATH=" + os.Getenv("PATH"), "HOME=" + t.TempDir(), "FETTLE_DATABASE_URL=" + pgtest.Empty(t),
		"GORACE=atexit_sleep_ms=0"} // under the race detector a program else waits a second at its end

	// The operator brings the database up, reads a delivery, and makes the first lead.
	d.operate("migrate")
	d.says(d.operate("import", "../../testdata/deliveries/tiny"), "22 supervoxels", "1 base segment is not held together", "4 new tasks")
	d.operate("person", "add", "rowan", "--role", "lead")
	d.tokens["rowan"] = strings.TrimSpace(d.operate("token", "new", "rowan"))
	address, stop := d.start("listening on ", "serve", "--no-worker", "--listen", "127.0.0.1:0")
	_, stopWorker := d.start("working", "work")
	d.env = append(d.env, "FETTLE_URL="+address)

	d.team()
	d.correct()
	d.audit()

	// The lead looks at the day; the operator reconciles while the server is up.
	d.says(d.as("rowan", "throughput"), "alder\t3\t2\t1\t0", "birch\t1\t1\t0\t0", "\t3\t3\t0\t1.000\t0.439\t1.000", "\t1\t0\t1\t0.000\t0.000\t0.793", "personal data")
	d.refused(5, "alder", "throughput", "--person", "birch")
	d.says(d.operate("reconcile", "tiny"), "at position 4: 4 entries, 22 supervoxels", "clean: no difference")
	stop()
	stopWorker()
	d.says(d.refused(6, "rowan", "queue"), "no answer from "+address)
}

// team: the lead adds people, names a neuron, and assigns the best task.
func (d *day) team() {
	for handle, role := range map[string]string{"alder": "proofreader", "birch": "proofreader", "cedar": "reviewer", "oak": ""} {
		add := []string{"person", "add", handle}
		if role != "" {
			add = append(add, "--role", role)
		}
		d.as("rowan", add...)
		var token struct{ Secret string }
		d.read(&token, "rowan", "token", "new", handle)
		d.tokens[handle] = token.Secret
	}
	d.as("rowan", "neuron", "add", "giant", "9007199254740993")
	d.says(d.as("rowan", "assign", "birch", "--best", "1"), "1 task")
}

// correct: a proofreader corrects badly and is returned; another does it well; a false split is joined.
func (d *day) correct() {
	d.says(d.as("birch", "claim"), "task           1", "false-merge", "2 nuclei in one segment")
	d.says(d.as("birch", "resolve", "corrected", "--group", "14", "--group", "17", "--preview"), "side 1", "side 2")
	d.says(d.as("birch", "resolve", "corrected", "--group", "14", "--group", "17", "--yes"), "entry    1, split")
	d.followed()
	d.refused(5, "birch", "review", "1", "accept")
	d.says(d.as("cedar", "reviews"), "1\tfalse-merge\tnuclei\tcorrected\tbirch")
	d.says(d.as("cedar", "review", "1", "return", "--note", "the second soma stays glued"), "entry    2, reversal")
	d.followed()

	d.says(d.as("alder", "claim", "--family", "nuclei"), "2 nuclei in one segment", "proposal")
	d.says(d.as("alder", "resolve", "corrected", "--as-proposed", "--note", "two somata", "--yes"), "entry    3, split")
	d.followed()
	d.says(d.as("alder", "claim", "--kind", "false-split"), "by contact")
	d.says(d.as("alder", "resolve", "sound", "--note", "they only touch"), "outcome  sound")
	d.says(d.as("alder", "claim", "--family", "tips"), "segments       300 301")
	d.says(d.as("alder", "resolve", "corrected", "--merge", "33,34", "--yes"), "entry    4, merge")
	d.followed()
	var waiting []struct{ Number json.Number }
	d.read(&waiting, "cedar", "reviews")
	for _, task := range waiting {
		d.says(d.as("cedar", "review", task.Number.String(), "accept"), "accepted")
	}
	if len(waiting) != 3 {
		d.Errorf("%d resolutions waited, not 3", len(waiting))
	}
}

// audit: somebody who may only read asks who did what, and what was when.
func (d *day) audit() {
	d.says(d.as("oak", "entries", "--oldest"), "1\t", "birch\tsplit\t9223372036854775809", "cedar\treversal", "two somata")
	d.says(d.as("oak", "neuron", "history", "giant"), "birch", "cedar", "alder")
	var entries []struct {
		Before, After []string
		At            time.Time
	}
	d.read(&entries, "oak", "entries", "--oldest")
	if len(entries) != 4 {
		d.Fatalf("%d entries, not 4", len(entries))
	}
	// The neuron's segment at every position, and at the time of each entry, is what the entries say.
	want := "9223372036854775809"
	for position := range len(entries) + 1 {
		ats := []string{strconv.Itoa(position)}
		if position > 0 {
			e := entries[position-1]
			ats = append(ats, e.At.Format(time.RFC3339Nano))
			if e.Before[0] == want {
				want = e.After[0] // the anchor is among the first group's seeds, or all of it came back together
			}
		}
		for _, at := range ats {
			d.says(d.as("oak", "neuron", "show", "giant", "--at", at), "segment   "+want+"\n")
		}
	}
	d.says(d.as("oak", "segment", "of", "36", "33"), entries[3].After[0])
	d.says(d.refused(4, "rowan", "merge", "33", "25", "--expect", "300", "--yes"), "current: "+entries[3].After[0])
	d.refused(5, "oak", "claim")
}
