// Package pgtest gives each test a PostgreSQL database of its own, migrated, and dropped when the test ends.
//
// The server is that of FETTLE_TEST_DATABASE_URL, or a private one that the first test of a process starts and that
// goes with the process. A database is a copy of a template that was migrated once, named by the hash of the migrations.
// Nothing is ever skipped: a machine without PostgreSQL's programs fails the test and says what to install.
// FETTLE_TEST_KEEP=1 keeps the database of a test that failed and prints its address.
package pgtest

import (
	"context"
	"fmt"
	"net/url"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/internal/pgserver"
	"fettle.example/fettle/migrations"
)

// New returns a pool on a fresh migrated database.
func New(t testing.TB) *pgxpool.Pool {
	t.Helper()
	return open(t, URL(t))
}

// URL returns the address of a fresh migrated database, for tests that start programs.
func URL(t testing.TB) string {
	t.Helper()
	return fresh(t, &quick)
}

// NewDurable is New on a server that waits for the disk at each commit, as a real one does: for benchmarks.
func NewDurable(t testing.TB) *pgxpool.Pool {
	t.Helper()
	return open(t, fresh(t, &durable))
}

// Empty returns the address of a fresh database without any table, for tests of migrations.
func Empty(t testing.TB) string {
	t.Helper()
	c := quick.get(t)
	return c.create(t, "template0")
}

func open(t testing.TB, url string) *pgxpool.Pool {
	t.Helper()
	pool, err := pg.Open(t.Context(), url)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(pool.Close)
	return pool
}

func fresh(t testing.TB, c *cluster) string {
	t.Helper()
	c.get(t)
	c.template.Do(func() { c.templateErr = c.migrate() })
	if c.templateErr != nil {
		t.Fatalf("template database: %v", c.templateErr)
	}
	return c.create(t, templateName())
}

// cluster is a server that the tests of one process share.
type cluster struct {
	scratch     bool
	start       sync.Once
	admin       string // address of a database to administer from
	err         error
	template    sync.Once
	templateErr error
	count       atomic.Int64
}

var (
	quick   = cluster{scratch: true}
	durable = cluster{}
)

// setup bounds what happens before a test's own work.
const setup = 2 * time.Minute

func (c *cluster) get(t testing.TB) *cluster {
	t.Helper()
	c.start.Do(func() {
		if c.admin = os.Getenv("FETTLE_TEST_DATABASE_URL"); c.admin != "" && c.scratch {
			return
		}
		ctx, cancel := context.WithTimeout(context.Background(), setup)
		defer cancel()
		var dir string
		if dir, c.err = folder(c.scratch); c.err != nil {
			return
		}
		var s *pgserver.Server
		if s, c.err = pgserver.Start(ctx, pgserver.Config{Dir: dir, Scratch: c.scratch}); c.err == nil {
			c.admin = s.URL()
		}
	})
	if c.err != nil {
		t.Fatalf("tests need a PostgreSQL: %v", c.err)
	}
	return c
}

const folderPrefix = "fettle-pgtest-"

// folder makes this process's data folder, and removes those of processes that are gone.
func folder(scratch bool) (string, error) {
	old, _ := filepath.Glob(filepath.Join(os.TempDir(), folderPrefix+"*"))
	for _, dir := range old {
		pid, err := strconv.Atoi(strings.Split(filepath.Base(dir)[len(folderPrefix):], "-")[0])
		if err == nil && syscall.Kill(pid, 0) == syscall.ESRCH {
			os.RemoveAll(dir)
		}
	}
	dir := filepath.Join(os.TempDir(), fmt.Sprintf("%s%d-%t", folderPrefix, os.Getpid(), scratch))
	return dir, os.MkdirAll(dir, 0o755)
}

func templateName() string { return "fettle_template_" + migrations.Hash()[:12] }

// migrate builds the template under another name and renames it when it is whole, one process at a time.
func (c *cluster) migrate() error {
	ctx, cancel := context.WithTimeout(context.Background(), setup)
	defer cancel()
	admin, err := pgx.Connect(ctx, c.admin)
	if err != nil {
		return err
	}
	defer admin.Close(ctx)
	if _, err := admin.Exec(ctx, `select pg_advisory_lock(hashtext('fettle test template'))`); err != nil {
		return err
	}
	name, exists := templateName(), false
	if err := admin.QueryRow(ctx, `select exists (select from pg_database where datname = $1)`, name).Scan(&exists); err != nil || exists {
		return err
	}
	building := name + "_building"
	for _, sql := range []string{`drop database if exists ` + building + ` with (force)`, `create database ` + building} {
		if _, err := admin.Exec(ctx, sql); err != nil {
			return err
		}
	}
	pool, err := pg.Open(ctx, c.database(building))
	if err != nil {
		return err
	}
	err = migrations.Up(ctx, pool)
	pool.Close()
	if err != nil {
		return err
	}
	_, err = admin.Exec(ctx, `alter database `+building+` rename to `+name)
	return err
}

// database is the address of another database of the cluster.
func (c *cluster) database(name string) string {
	u, err := url.Parse(c.admin)
	if err != nil {
		return c.admin
	}
	u.Path = "/" + name
	return u.String()
}

// create copies a template, and drops the copy when the test ends.
func (c *cluster) create(t testing.TB, template string) string {
	t.Helper()
	name := fmt.Sprintf("fettle_test_%d_%d", os.Getpid(), c.count.Add(1))
	if err := c.exec(`create database ` + name + ` template ` + template + ` strategy file_copy`); err != nil {
		t.Fatalf("copy the template database: %v", err)
	}
	address := c.database(name)
	t.Cleanup(func() {
		if t.Failed() && os.Getenv("FETTLE_TEST_KEEP") != "" {
			t.Logf("kept database %s", address)
			return
		}
		if err := c.exec(`drop database ` + name + ` with (force)`); err != nil {
			t.Errorf("drop the test's database: %v", err)
		}
	})
	return address
}

func (c *cluster) exec(sql string) error {
	ctx, cancel := context.WithTimeout(context.Background(), setup)
	defer cancel()
	admin, err := pgx.Connect(ctx, c.admin)
	if err != nil {
		return err
	}
	defer admin.Close(ctx)
	_, err = admin.Exec(ctx, sql)
	return err
}
