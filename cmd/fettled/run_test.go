package main

import (
	"bufio"
	"bytes"
	"context"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"fettle.example/fettle/internal/pgtest"
)

// invoke runs the program in this process.
func invoke(ctx context.Context, args ...string) (code int, out, errs string) {
	var o, e bytes.Buffer
	code = run(ctx, args, strings.NewReader(""), &o, &e)
	return code, o.String(), e.String()
}

// folder is one that PostgreSQL's user can reach, as those of t.TempDir are not.
func folder(t *testing.T) string {
	t.Helper()
	dir, err := os.MkdirTemp("", "fettled-")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.RemoveAll(dir) })
	if err := os.Chmod(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	return dir
}

func TestADeliveryWithErrorsIsRefusedWithTheirPlaces(t *testing.T) {
	dir := t.TempDir()
	if err := os.CopyFS(dir, os.DirFS("../../testdata/deliveries/tiny")); err != nil {
		t.Fatal(err)
	}
	table := filepath.Join(dir, "supervoxels.csv")
	text, err := os.ReadFile(table)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(table, bytes.Replace(text, []byte("\n13,"), []byte("\nthirteen,"), 1), 0o600); err != nil {
		t.Fatal(err)
	}
	database := pgtest.URL(t)
	code, out, errs := invoke(t.Context(), "import", dir, "--database", database)
	if code != exitFailure || out != "" {
		t.Errorf("exit code %d, printed %q", code, out)
	}
	for _, want := range []string{"table ", "supervoxels  4     supervoxel_id  thirteen", "fettled: the delivery has 1 problem", "next: "} {
		if !strings.Contains(errs, want) {
			t.Errorf("%q is not in\n%s", want, errs)
		}
	}
	code, out, errs = invoke(t.Context(), "reconcile", "tiny", "--database", database)
	if code != exitFailure || !strings.Contains(errs, "tiny") {
		t.Errorf("something of it stayed: %d %s %s", code, out, errs)
	}
}

func TestReconcileTellsOfADifference(t *testing.T) {
	database := pgtest.URL(t)
	if code, _, errs := invoke(t.Context(), "import", "../../testdata/deliveries/tiny", "--no-triage", "--database", database); code != exitOK {
		t.Fatal(errs)
	}
	d, err := Open(t.Context(), Config{Database: database}, nil)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Close()
	// A segment that no entry made, as a person with psql might leave it.
	if _, err := d.Pool.Exec(t.Context(), `insert into segment
		(volume_id, segment_id, grp, born, supervoxels, voxels, synapses_in, synapses_out, nuclei, bounds_nm)
		select volume_id, 4294967296, 99, 1, 1, 1, 0, 0, 0, '{0, 0, 0, 0, 0, 0}' from volume`); err != nil {
		t.Fatal(err)
	}
	code, out, errs := invoke(t.Context(), "reconcile", "tiny", "--database", database)
	if code != exitFailure || !strings.Contains(out, "differs: ") || !strings.Contains(errs, "next: stop posting") {
		t.Errorf("exit code %d\n%s%s", code, out, errs)
	}
}

func TestWrongUsageIsExitCodeTwo(t *testing.T) {
	for _, args := range [][]string{
		{"juggle"}, {"import"}, {"serve", "--juggle"}, {"person", "juggle"},
		{"migrate", "--config", filepath.Join(t.TempDir(), "none.toml")},
	} {
		code, _, errs := invoke(t.Context(), args...)
		if code != exitUsage || !strings.Contains(errs, "next: ") {
			t.Errorf("%v: exit code %d, want %d\n%s", args, code, exitUsage, errs)
		}
	}
}

// A person is added while the server runs on the same private PostgreSQL, and is there at the next start.
func TestOperatorsWorkBesideTheServer(t *testing.T) {
	t.Parallel()
	data := filepath.Join(folder(t), "data")
	ctx, stop := context.WithCancel(t.Context())
	said, out := io.Pipe()
	ended := make(chan int)
	go func() {
		ended <- run(ctx, []string{"serve", "--data", data, "--listen", "127.0.0.1:0"}, strings.NewReader(""), out, t.Output())
		out.Close()
	}()
	if line, err := bufio.NewReader(said).ReadString('\n'); !strings.HasPrefix(line, "listening on http://127.0.0.1:") {
		t.Fatalf("%q, %v", line, err)
	}
	if code, out, errs := invoke(t.Context(), "person", "add", "rowan", "--role", "lead", "--data", data); code != exitOK || out != "added rowan: lead\nnext: fettled token new rowan\n" {
		t.Errorf("exit code %d\n%s%s", code, out, errs)
	}
	stop()
	if code := <-ended; code != exitOK {
		t.Errorf("the server ended with %d", code)
	}
	if code, out, errs := invoke(t.Context(), "token", "new", "rowan", "--data", data); code != exitOK || !strings.HasPrefix(out, "fettle_") {
		t.Errorf("exit code %d\n%s%s", code, out, errs)
	}
}

// The demonstration runs on a database of its own, tells what happened, and goes on where it stopped.
func TestDemonstration(t *testing.T) {
	t.Parallel()
	data := filepath.Join(folder(t), "demo")
	code, out, errs := invoke(t.Context(), "demo", "--data", data, "--tasks", "3")
	if code != exitOK {
		t.Fatalf("exit code %d\n%s%s", code, out, errs)
	}
	for _, want := range []string{"volume cricket-ganglion", "Errors against the truth", "false merges ", "adapted Rand error",
		"corrected  sound", "People (simulated)", "personal data", "Top of the ledger", "FETTLE_TOKEN=fettle_"} {
		if !strings.Contains(out, want) {
			t.Errorf("%q is not in\n%s", want, out)
		}
	}
	code, out, errs = invoke(t.Context(), "demo", "--data", data, "--tasks", "1")
	if code != exitOK || !strings.Contains(out, "going on with volume cricket-ganglion") || strings.Contains(out, "imported") {
		t.Errorf("exit code %d\n%s%s", code, out, errs)
	}
	if code, out, errs := invoke(t.Context(), "reconcile", "cricket-ganglion", "--data", data); code != exitOK {
		t.Errorf("exit code %d\n%s%s", code, out, errs)
	}
}
