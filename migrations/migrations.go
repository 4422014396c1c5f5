// Package migrations brings a database to the shape this program needs, and says which shape that is.
//
// It promises that any number of processes may call [Up] at once, and that a step which was interrupted, whether or
// not its work was committed, is healed at the next call. There are no down steps: they would destroy the ledger.
// What the tables mean is said in the files; the rooms that use them are named there.
package migrations

import (
	"context"
	"crypto/sha256"
	"embed"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/golang-migrate/migrate/v4"
	"github.com/golang-migrate/migrate/v4/database"
	migratepgx "github.com/golang-migrate/migrate/v4/database/pgx/v5"
	"github.com/golang-migrate/migrate/v4/source/iofs"
	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"
	"github.com/jackc/pgx/v5/stdlib"
	"github.com/riverqueue/river/riverdriver/riverpgxv5"
	"github.com/riverqueue/river/rivermigrate"

	"fettle.example/fettle/internal/fault"
)

// FS holds the files, named NNNNNN_subject.up.sql.
//
//go:embed *.up.sql
var FS embed.FS

// JobSchema is where River keeps its own tables, with its own version line.
const JobSchema = "river"

// lockKey names the advisory lock around both migrators; any number that nobody else uses.
const lockKey = 0x66657474_6c650001

// lockTimeout bounds the wait for another process that migrates.
const lockTimeout = 5 * time.Minute

// Hash names the shape: it changes with any file's name or content, and with River's version.
func Hash() string {
	h := sha256.New()
	for _, name := range files() {
		text, _ := FS.ReadFile(name)
		fmt.Fprintf(h, "%s %d\n%s", name, len(text), text)
	}
	fmt.Fprintf(h, "river %d", len(riverVersions()))
	return hex.EncodeToString(h.Sum(nil))
}

func riverVersions() []rivermigrate.Migration {
	m, err := rivermigrate.New(riverpgxv5.New(nil), &rivermigrate.Config{Schema: JobSchema})
	if err != nil {
		return nil
	}
	return m.AllVersions()
}

func files() []string {
	names, _ := fs.Glob(FS, "*.up.sql")
	slices.Sort(names)
	return names
}

// versions lists the numbers of the files, ascending.
func versions() []int {
	var out []int
	for _, name := range files() {
		n, _ := strconv.Atoi(name[:strings.IndexByte(name, '_')])
		out = append(out, n)
	}
	return out
}

// Up applies what is missing. A crash here leaves a database that the next Up completes.
func Up(ctx context.Context, pool *pgxpool.Pool) error {
	unlock, err := lock(ctx, pool)
	if err != nil {
		return fmt.Errorf("migrate: %w", err)
	}
	defer unlock()
	if err := ours(ctx, pool); err != nil {
		return fmt.Errorf("migrate: %w", err)
	}
	if err := jobs(ctx, pool); err != nil {
		return fmt.Errorf("migrate jobs: %w", err)
	}
	return nil
}

// lock waits until no other process migrates. It is a session lock, so a killed process leaves none behind, on a
// connection of its own, so that waiting callers don't hold the pool's.
func lock(ctx context.Context, pool *pgxpool.Pool) (unlock func(), err error) {
	conn, err := pgx.ConnectConfig(ctx, pool.Config().ConnConfig)
	if err != nil {
		return nil, err
	}
	unlock = func() { _ = conn.Close(context.WithoutCancel(ctx)) }
	ctx, cancel := context.WithTimeout(ctx, lockTimeout)
	defer cancel()
	if _, err := conn.Exec(ctx, `select pg_advisory_lock($1)`, int64(lockKey)); err != nil {
		unlock()
		return nil, fault.New(fault.Busy, "schema-locked", "another process has been migrating this database for long").
			WithNext("try again when it is done").Wrap(err)
	}
	return unlock, nil
}

// ours applies the files of this folder.
func ours(ctx context.Context, pool *pgxpool.Pool) (err error) {
	db := stdlib.OpenDBFromPool(pool)
	driver, err := migratepgx.WithInstance(db, &migratepgx.Config{})
	if err != nil {
		return errors.Join(err, db.Close())
	}
	src, err := iofs.New(FS, ".")
	if err != nil {
		return errors.Join(err, driver.Close())
	}
	m, err := migrate.NewWithInstance("files", src, "postgres", driver)
	if err != nil {
		return errors.Join(err, src.Close(), driver.Close())
	}
	defer func() {
		srcErr, dbErr := m.Close()
		err = errors.Join(err, srcErr, dbErr)
	}()
	m.LockTimeout = lockTimeout
	if err := repair(ctx, pool, driver); err != nil {
		return err
	}
	if err := m.Up(); !errors.Is(err, migrate.ErrNoChange) {
		return err
	}
	return nil
}

// repair clears the mark of a step that was interrupted: its row in schema_done tells whether its work was committed.
func repair(ctx context.Context, pool *pgxpool.Pool, driver database.Driver) (err error) {
	if err := driver.Lock(); err != nil { // waits for a backend that is still dying
		return err
	}
	defer func() { err = errors.Join(err, driver.Unlock()) }()
	version, dirty, err := driver.Version()
	if err != nil {
		return err
	}
	if version != database.NilVersion && !slices.Contains(versions(), version) {
		return fault.Newf(fault.Conflict, "schema-newer", "the database has step %d, which this program does not know", version).
			WithNext("run the newer program that migrated it")
	}
	if !dirty {
		return nil
	}
	whole, err := done(ctx, pool, version)
	if err != nil {
		return err
	}
	if !whole {
		version = before(version)
	}
	return driver.SetVersion(version, false)
}

// done tells whether a step's work was committed. The first step makes the table that is asked.
func done(ctx context.Context, pool *pgxpool.Pool, version int) (yes bool, err error) {
	if err := pool.QueryRow(ctx, `select to_regclass('schema_done') is not null`).Scan(&yes); err != nil || !yes {
		return false, err
	}
	err = pool.QueryRow(ctx, `select exists (select from schema_done where version = $1)`, version).Scan(&yes)
	return yes, err
}

// before is the number of the step before one, or database.NilVersion.
func before(version int) int {
	previous := database.NilVersion
	for _, n := range versions() {
		if n < version {
			previous = n
		}
	}
	return previous
}

// jobs brings River's tables up to date. River's migrator takes no lock of its own; Up holds ours.
func jobs(ctx context.Context, pool *pgxpool.Pool) error {
	// Asked first, because an application that may not create schemas need not.
	var there bool
	if err := pool.QueryRow(ctx, `select to_regnamespace($1) is not null`, JobSchema).Scan(&there); err != nil {
		return err
	}
	if !there {
		if _, err := pool.Exec(ctx, `create schema if not exists `+JobSchema); err != nil {
			return err
		}
	}
	m, err := rivermigrate.New(riverpgxv5.New(pool), &rivermigrate.Config{Schema: JobSchema})
	if err != nil {
		return err
	}
	_, err = m.Migrate(ctx, rivermigrate.DirectionUp, nil)
	return err
}
