package base_test

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/ledger/base"
)

// TestInterruptedImportLeavesNothing cancels an import at every word of progress in turn. Nothing stays in the database
// or in the folder for temporary files, and the next import is as if there had been none.
func TestInterruptedImportLeavesNothing(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	dir := invent(rand.New(rand.NewPCG(3, 4)), 5000).write(t, ".csv")
	temp := t.TempDir()
	var stages []string
	for at := 0; ; at++ {
		ctx, cancel := context.WithCancel(t.Context())
		said, last := 0, ""
		_, err := base.Import(ctx, pool, dir, base.ImportOptions{TempDir: temp, Progress: func(p base.Progress) {
			if said == at {
				cancel()
			}
			said, last = said+1, p.Stage
		}})
		cancel()
		if entries, e := os.ReadDir(temp); e != nil || len(entries) > 0 {
			t.Fatalf("after %q: %v, %v stay in the temporary folder", last, entries, e)
		}
		if err == nil {
			break
		}
		if !errors.Is(err, context.Canceled) {
			t.Fatalf("after %q: %v", last, err)
		}
		if n := stored(t, pool); n != 0 {
			t.Fatalf("after %q: %d rows stayed behind", last, n)
		}
		stages = append(stages, last)
	}
	want := []string{"reading supervoxels", "reading contacts", "reading synapses", "reading nuclei", "reading truth", "arranging", "storing supervoxels"}
	if got := slices.Compact(stages); !slices.Equal(got, want) {
		t.Errorf("it was interrupted at %q, want %q", got, want)
	}
	var name string
	if err := pool.QueryRow(t.Context(), `select name from volume`).Scan(&name); err != nil || name != "invented" {
		t.Errorf("the import that nobody interrupted stored %q, %v", name, err)
	}
}

// TestKilledImportLeavesNothing kills a process that is storing. Its folder for temporary files goes with the next import.
func TestKilledImportLeavesNothing(t *testing.T) {
	t.Parallel()
	url, temp := pgtest.URL(t), t.TempDir()
	dir := invent(rand.New(rand.NewPCG(3, 4)), 9000).write(t, ".csv")
	cmd := exec.Command(os.Args[0], "-test.run", "^TestMain$")
	cmd.Env = append(os.Environ(), "FETTLE_TEST_IMPORT="+strings.Join([]string{url, dir, temp}, "\n"))
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	in, err := cmd.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	defer in.Close()
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	defer cmd.Process.Kill() //nolint:errcheck // mostly dead by then
	if line, err := bufio.NewReader(out).ReadString('\n'); line != "storing\n" {
		t.Fatalf("the other process said %q, %v", line, err)
	}
	if err := cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	cmd.Wait() //nolint:errcheck // killed, so it fails

	left, err := filepath.Glob(filepath.Join(temp, "fettle-import-*"))
	if err != nil || len(left) != 1 {
		t.Fatalf("it left %v, %v; want one folder", left, err)
	}
	pool, err := pg.Open(t.Context(), url)
	if err != nil {
		t.Fatal(err)
	}
	defer pool.Close()
	if n := stored(t, pool); n != 0 {
		t.Errorf("%d rows stayed behind", n)
	}
	if _, err := base.Import(t.Context(), pool, dir, base.ImportOptions{TempDir: temp}); err != nil {
		t.Fatal(err)
	}
	if left, err := filepath.Glob(filepath.Join(temp, "*")); err != nil || len(left) != 0 {
		t.Errorf("%v stays in the temporary folder, %v", left, err)
	}
}

// TestMain is the other process of the test above when it finds its instructions: it imports, says when it stores, and
// waits there to be killed, or until the test is over.
func TestMain(m *testing.M) {
	todo := strings.Split(os.Getenv("FETTLE_TEST_IMPORT"), "\n")
	if len(todo) != 3 {
		os.Exit(m.Run())
	}
	ctx := context.Background()
	pool, err := pg.Open(ctx, todo[0])
	if err != nil {
		fmt.Println(err)
		os.Exit(1)
	}
	_, err = base.Import(ctx, pool, todo[1], base.ImportOptions{TempDir: todo[2], Progress: func(p base.Progress) {
		if p.Stage == "storing supervoxels" && p.Done == p.Total {
			fmt.Println("storing")
			io.Copy(io.Discard, os.Stdin) //nolint:errcheck // ends when the test does
		}
	}})
	fmt.Println(err)
	os.Exit(1)
}

// TestLostConnectionLeavesNothing ends the session that stores, from another one.
func TestLostConnectionLeavesNothing(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	dir := invent(rand.New(rand.NewPCG(3, 4)), 9000).write(t, ".csv")
	ended := 0
	_, err := base.Import(t.Context(), pool, dir, base.ImportOptions{Progress: func(p base.Progress) {
		if p.Stage == "storing supervoxels" && p.Done < p.Total && ended == 0 {
			err := pool.QueryRow(t.Context(), `
				select count(pg_terminate_backend(pid)) from pg_stat_activity
				 where datname = current_database() and pid <> pg_backend_pid() and query like 'copy "base_block"%'`).Scan(&ended)
			if err != nil {
				t.Error(err)
			}
		}
	}})
	if ended != 1 || err == nil {
		t.Fatalf("%d sessions were ended, and the import says %v", ended, err)
	}
	if n := stored(t, pool); n != 0 {
		t.Errorf("%d rows stayed behind", n)
	}
	importInto(t, pool, dir, "")
}

// TestTwoImportsOfOneName: the database decides which of two that began together is there.
func TestTwoImportsOfOneName(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	results := make(chan error)
	for range 2 {
		go func() {
			_, err := base.Import(t.Context(), pool, tiny, base.ImportOptions{})
			results <- err
		}()
	}
	first, second := <-results, <-results
	if (first == nil) == (second == nil) {
		t.Fatalf("one of two should fail: %v; %v", first, second)
	}
	if n := stored(t, pool); n != 1+6+1+7+3 {
		t.Errorf("%d rows are stored", n)
	}
}

// TestFoldersOfDeadImportsAreRemoved: the folder of a killed process goes, that of a running one stays.
func TestFoldersOfDeadImportsAreRemoved(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	temp := t.TempDir()
	dead, alive := filepath.Join(temp, "fettle-import-dead"), filepath.Join(temp, "fettle-import-alive")
	for _, dir := range []string{dead, alive} {
		if err := os.Mkdir(dir, 0o700); err != nil {
			t.Fatal(err)
		}
		put(t, dir, "run-1", []byte("records"))
		put(t, dir, "lock", nil)
	}
	lock, err := os.Open(filepath.Join(alive, "lock"))
	if err != nil {
		t.Fatal(err)
	}
	defer lock.Close()
	if err := syscall.Flock(int(lock.Fd()), syscall.LOCK_EX); err != nil {
		t.Fatal(err)
	}
	if _, err := base.Import(t.Context(), pool, tiny, base.ImportOptions{TempDir: temp}); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(dead); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the dead import's folder: %v", err)
	}
	if _, err := os.Stat(filepath.Join(alive, "run-1")); err != nil {
		t.Errorf("the running import's folder: %v", err)
	}
}

// TestDamagedBlocksAreNoticed: an open base that meets bytes that are not its own says so.
func TestDamagedBlocksAreNoticed(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	_, report := importInto(t, pool, tiny, "")
	whole := []base.Range{{Lo: 0, Hi: 22}}
	for _, section := range []string{"ids", "segments", "boxes", "geometry", "accepted", "rejected", "truth"} {
		for _, sql := range []string{
			`update base_block set data = substring(data for length(data) - 1) where section = $1`,
			`delete from base_block where section = $1`,
		} {
			tx, err := pool.Begin(t.Context())
			if err != nil {
				t.Fatal(err)
			}
			if _, err := tx.Exec(t.Context(), `set local session_replication_role = replica`); err != nil { // past the triggers
				t.Fatal(err)
			}
			if _, err := tx.Exec(t.Context(), sql, section); err != nil {
				t.Fatal(err)
			}
			b, err := base.Open(t.Context(), tx, report.Info.VolumeID)
			if err == nil {
				_, err = b.View(t.Context(), tx, whole)
			}
			if err == nil {
				_, _, _, err = b.Truth(t.Context(), tx)
			}
			if err == nil {
				t.Errorf("section %s after %q: nobody noticed", section, sql)
			}
			if err := tx.Rollback(t.Context()); err != nil {
				t.Fatal(err)
			}
		}
	}
}

// TestWhatWasDeliveredIsFinal: not even the superuser, who runs the tests, changes a base by a plain statement.
func TestWhatWasDeliveredIsFinal(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	importInto(t, pool, tiny, "")
	for _, table := range []string{"volume", "base_block", "base_synapse", "base_nucleus"} {
		for _, sql := range []string{"update " + table + " set volume_id = 9", "delete from " + table, "truncate " + table + " cascade"} {
			if _, err := pool.Exec(t.Context(), sql); pg.Constraint(err) != "base_is_final" {
				t.Errorf("%s: %v", sql, err)
			}
		}
	}
}

// TestUnknownLayoutIsNotOpened: a base that a later program wrote is not read as if this one had.
func TestUnknownLayoutIsNotOpened(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	_, report := importInto(t, pool, tiny, "")
	err := pg.InTx(t.Context(), pool, func(ctx context.Context, tx pgx.Tx) error {
		if _, err := tx.Exec(ctx, `set local session_replication_role = replica`); err != nil {
			return err
		}
		_, err := tx.Exec(ctx, `update volume set layout = 99`)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := base.Open(t.Context(), pool, report.Info.VolumeID); err == nil {
		t.Error("it was opened")
	}
}

// TestRangesAreChecked: readers that ask for what is not there learn it.
func TestRangesAreChecked(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	b, _ := importInto(t, pool, tiny, "")
	for _, ranges := range [][]base.Range{{{Lo: 0, Hi: 23}}, {{Lo: 3, Hi: 3}}, {{Lo: 4, Hi: 6}, {Lo: 5, Hi: 7}}, {{Lo: 4, Hi: 6}, {Lo: 0, Hi: 2}}} {
		if v, err := b.View(t.Context(), pool, ranges); err == nil {
			t.Errorf("view of %v: %d supervoxels", ranges, v.Len())
		}
		if _, err := b.Totals(t.Context(), pool, ranges); err == nil {
			t.Errorf("totals of %v", ranges)
		}
		if _, _, err := b.Nearest(t.Context(), pool, ranges, base.Point{}); err == nil {
			t.Errorf("nearest of %v", ranges)
		}
	}
	if _, err := b.SupervoxelIDs(t.Context(), pool, []uint32{22}); err == nil {
		t.Error("there is an id for an ordinal beyond the last")
	}
	all := make([]uint32, 22)
	for g := range all {
		all[g] = uint32(g)
	}
	ids, err := b.SupervoxelIDs(t.Context(), pool, all)
	if err != nil {
		t.Fatal(err)
	}
	for g, id := range ids {
		if back, ok := b.Ordinal(id); !ok || back != uint32(g) {
			t.Error(fmt.Sprint("ordinal ", g, " has id ", id, ", which has ordinal ", back))
		}
	}
}
