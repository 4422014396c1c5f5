package migrations_test

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/migrations"
)

// Any number of processes start at once; all of them find a whole database.
func TestManyAtOnce(t *testing.T) {
	t.Parallel()
	address := pgtest.Empty(t)
	const processes = 6
	failed := make(chan error, processes)
	for range processes {
		pool := open(t, address)
		go func() { failed <- migrations.Up(t.Context(), pool) }()
	}
	for range processes {
		if err := <-failed; err != nil {
			t.Error(err)
		}
	}
	isWhole(t, open(t, address))
}

// Waiting for others takes no connection of the pool, so callers that share a small pool don't lock each other out.
func TestManyAtOnceOnOneSmallPool(t *testing.T) {
	t.Parallel()
	cfg, err := pgxpool.ParseConfig(pgtest.Empty(t))
	if err != nil {
		t.Fatal(err)
	}
	cfg.MaxConns = 3
	pool, err := pgxpool.NewWithConfig(t.Context(), cfg)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(pool.Close)
	const callers = 6
	failed := make(chan error, callers)
	for range callers {
		go func() { failed <- migrations.Up(t.Context(), pool) }()
	}
	for range callers {
		if err := <-failed; err != nil {
			t.Error(err)
		}
	}
	isWhole(t, pool)
}

// A step that was killed is marked dirty, whether the server went on and committed it or not. Both are healed.
func TestHalfDoneStepIsHealed(t *testing.T) {
	t.Parallel()
	for i, name := range files(t) {
		for _, committed := range []bool{false, true} {
			t.Run(fmt.Sprintf("%s committed %t", name, committed), func(t *testing.T) {
				t.Parallel()
				pool := open(t, pgtest.Empty(t))
				n := i
				if committed {
					n = i + 1
				}
				stand(t, pool, n)
				mark(t, pool, number(t, name), true)
				if err := migrations.Up(t.Context(), pool); err != nil {
					t.Fatal(err)
				}
				isWhole(t, pool)
			})
		}
	}
}

// The server's own process dies in the middle of a step.
func TestKilledStepIsHealed(t *testing.T) {
	t.Parallel()
	pool := open(t, pgtest.Empty(t))
	stand(t, pool, 2)
	mark(t, pool, 2, false)
	holder, err := pool.Begin(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	// The third step refers to this table, so it waits here.
	exec(t, holder, `lock table volume in row exclusive mode`)
	died := make(chan error)
	go func() { died <- migrations.Up(t.Context(), pool) }()
	for killed := false; !killed; {
		select {
		case err := <-died:
			t.Fatalf("the migration did not wait for the lock: %v", err)
		default:
		}
		err := pool.QueryRow(t.Context(), `
			select coalesce(bool_or(pg_terminate_backend(pid)), false) from pg_locks
			 where relation = 'volume'::regclass and not granted`).Scan(&killed)
		if err != nil {
			t.Fatal(err)
		}
	}
	if err := <-died; err == nil {
		t.Fatal("the killed migration says that it is done")
	}
	if err := holder.Rollback(t.Context()); err != nil {
		t.Fatal(err)
	}
	var dirty bool
	if err := pool.QueryRow(t.Context(), `select dirty from schema_migrations where version = 3`).Scan(&dirty); err != nil || !dirty {
		t.Fatalf("the test should have left step 3 half-done: dirty %t, %v", dirty, err)
	}
	if err := migrations.Up(t.Context(), pool); err != nil {
		t.Fatal(err)
	}
	isWhole(t, pool)
}

// A program that is older than the database touches nothing, whole or half-done.
func TestNewerDatabaseIsRefused(t *testing.T) {
	t.Parallel()
	for _, dirty := range []bool{false, true} {
		t.Run(fmt.Sprintf("dirty %t", dirty), func(t *testing.T) {
			t.Parallel()
			pool := pgtest.New(t)
			mark(t, pool, 999, dirty)
			err := migrations.Up(t.Context(), pool)
			if want := fault.New(fault.Conflict, "schema-newer", ""); !errors.Is(err, want) {
				t.Errorf("Up = %v, want %s", err, want.Code)
			}
			var version int
			if err := pool.QueryRow(t.Context(), `select version from schema_migrations`).Scan(&version); err != nil || version != 999 {
				t.Errorf("version is %d now (%v)", version, err)
			}
		})
	}
}

// Files are numbered from one without a gap: golang-migrate would never apply one that is added behind the head.
func TestNumbers(t *testing.T) {
	for i, name := range files(t) {
		if !regexp.MustCompile(`^\d{6}_[a-z]+\.up\.sql$`).MatchString(name) {
			t.Errorf("%s is not named NNNNNN_subject.up.sql", name)
		}
		if n := number(t, name); n != i+1 {
			t.Errorf("%s stands in place %d", name, i+1)
		}
	}
}

// Each file ends by telling that its work is done, in the transaction of that work.
func TestEveryStepSaysThatItIsDone(t *testing.T) {
	for _, name := range files(t) {
		want := fmt.Sprintf("insert into schema_done (version) values (%d);", number(t, name))
		sql := strings.TrimSpace(text(t, name))
		if !strings.HasSuffix(sql, want) {
			t.Errorf("%s does not end with %s", name, want)
		}
		if strings.Count(sql, "insert into schema_done") != 1 {
			t.Errorf("%s tells more than once that it is done", name)
		}
		if regexp.MustCompile(`(?im)^\s*(begin|commit|rollback)\s*;`).MatchString(sql) || regexp.MustCompile(`(?i)\bconcurrently\b`).MatchString(sql) {
			t.Errorf("%s must be one transaction, which the server opens and ends", name)
		}
	}
}

// stand applies the first n files by hand, as golang-migrate would.
func stand(t *testing.T, pool *pgxpool.Pool, n int) {
	t.Helper()
	exec(t, pool, `create table schema_migrations (version bigint not null primary key, dirty boolean not null)`)
	for _, name := range files(t)[:n] {
		exec(t, pool, text(t, name))
	}
}

// mark writes golang-migrate's mark.
func mark(t *testing.T, pool *pgxpool.Pool, version int, dirty bool) {
	t.Helper()
	exec(t, pool, fmt.Sprintf(`truncate schema_migrations; insert into schema_migrations values (%d, %t)`, version, dirty))
}

// isWhole fails unless every step is done once, and River's tables are there.
func isWhole(t *testing.T, pool *pgxpool.Pool) {
	t.Helper()
	var want []int
	for _, name := range files(t) {
		want = append(want, number(t, name))
	}
	rows, _ := pool.Query(t.Context(), `select version from schema_done order by version`)
	got, err := pgx.CollectRows(rows, pgx.RowTo[int])
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(want, got); diff != "" {
		t.Errorf("steps done (-want +got):\n%s", diff)
	}
	var version int
	var dirty, jobs bool
	err = pool.QueryRow(t.Context(), `select version, dirty, to_regclass('river.river_job') is not null from schema_migrations`).
		Scan(&version, &dirty, &jobs)
	if err != nil || version != want[len(want)-1] || dirty || !jobs {
		t.Errorf("version %d, dirty %t, River's tables %t, %v", version, dirty, jobs, err)
	}
}

func files(t *testing.T) []string {
	t.Helper()
	names, err := fs.Glob(migrations.FS, "*.up.sql")
	if err != nil || len(names) == 0 {
		t.Fatalf("no migrations: %v", err)
	}
	slices.Sort(names)
	return names
}

func text(t *testing.T, name string) string {
	t.Helper()
	b, err := fs.ReadFile(migrations.FS, name)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

func number(t *testing.T, name string) int {
	t.Helper()
	n, err := strconv.Atoi(name[:strings.IndexByte(name, '_')])
	if err != nil {
		t.Fatal(err)
	}
	return n
}

func open(t *testing.T, address string) *pgxpool.Pool {
	t.Helper()
	pool, err := pg.Open(t.Context(), address)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(pool.Close)
	return pool
}

func exec(t *testing.T, db pg.DB, sql string) {
	t.Helper()
	if _, err := db.Exec(context.WithoutCancel(t.Context()), sql); err != nil {
		t.Fatal(err)
	}
}
