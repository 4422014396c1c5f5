// Package pg is how every room talks to PostgreSQL: a pool, a transaction that cannot be misused, and the name of the
// constraint that refused a statement. It knows no table.
package pg

import (
	"context"
	"errors"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"
	"github.com/jackc/pgx/v5/pgxpool"
)

// DB is what a pool and a transaction have in common: what a step needs that runs inside either.
type DB interface {
	Exec(ctx context.Context, sql string, args ...any) (pgconn.CommandTag, error)
	Query(ctx context.Context, sql string, args ...any) (pgx.Rows, error)
	QueryRow(ctx context.Context, sql string, args ...any) pgx.Row
	SendBatch(ctx context.Context, b *pgx.Batch) pgx.BatchResults
	CopyFrom(ctx context.Context, table pgx.Identifier, columns []string, src pgx.CopyFromSource) (int64, error)
	Begin(ctx context.Context) (pgx.Tx, error)
}

var (
	_ DB = (*pgxpool.Pool)(nil)
	_ DB = (pgx.Tx)(nil)
)

// idleInTransaction ends a transaction whose client went silent, because an open snapshot slows the queue for
// everybody: dead index entries at its head cannot be dropped.
const idleInTransaction = time.Minute

// minConns is the smallest pool for a server whose writers wait for the disk: more connections than cores let
// commits share a flush.
const minConns = 16

// Open connects a pool and waits until the database answers.
func Open(ctx context.Context, url string) (*pgxpool.Pool, error) {
	cfg, err := pgxpool.ParseConfig(url)
	if err != nil {
		return nil, fmt.Errorf("database address: %w", err)
	}
	cfg.MaxConns = max(cfg.MaxConns, minConns)
	p := cfg.ConnConfig.RuntimeParams
	if p["application_name"] == "" {
		p["application_name"] = "fettle"
	}
	if p["idle_in_transaction_session_timeout"] == "" {
		p["idle_in_transaction_session_timeout"] = fmt.Sprint(idleInTransaction.Milliseconds())
	}
	p["timezone"] = "UTC"
	pool, err := pgxpool.NewWithConfig(ctx, cfg)
	if err != nil {
		return nil, fmt.Errorf("database pool: %w", err)
	}
	if err := pool.Ping(ctx); err != nil {
		pool.Close()
		return nil, fmt.Errorf("the database does not answer: %w", err)
	}
	return pool, nil
}

// rollbackTimeout bounds the rollback of a transaction whose own context may have ended.
const rollbackTimeout = 5 * time.Second

// InTx runs fn in a transaction: commit when it returns nil, rollback on an error or a panic, even when ctx has
// ended. fn must not commit or roll back itself.
func InTx(ctx context.Context, db interface {
	Begin(context.Context) (pgx.Tx, error)
}, fn func(ctx context.Context, tx pgx.Tx) error) error {
	tx, err := db.Begin(ctx)
	if err != nil {
		return fmt.Errorf("begin: %w", err)
	}
	done := false
	defer func() {
		if done {
			return
		}
		back, cancel := context.WithTimeout(context.WithoutCancel(ctx), rollbackTimeout)
		defer cancel()
		_ = tx.Rollback(back) // the connection is dropped when this fails, which rolls back too
	}()
	if err := fn(ctx, tx); err != nil {
		return err
	}
	done = true
	if err := tx.Commit(ctx); err != nil {
		return fmt.Errorf("commit: %w", err)
	}
	return nil
}

// Constraint is the name of the constraint that refused a statement, or the one that a trigger or function named
// when it raised; "" when err is something else. Constraints are matched by this name, never by message.
func Constraint(err error) string {
	var e *pgconn.PgError
	if errors.As(err, &e) {
		return e.ConstraintName
	}
	return ""
}

// Code is the SQLSTATE of a database's refusal, "" when err is something else.
func Code(err error) string {
	var e *pgconn.PgError
	if errors.As(err, &e) {
		return e.Code
	}
	return ""
}
