package migrations

import (
	"context"
	"errors"
	"fmt"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// Grant lets a role that owns nothing do the application's work, and no more: it may not change or remove what is final (the base,
// entries, checkpoints, the history of tasks), nor truncate, alter or drop anything, nor switch a trigger off. The caller owns the
// tables; the role exists and may log in. Granting again after a migration covers the new tables.
//
// What is final is read from the tables themselves: where a trigger before the statement refuses UPDATE or DELETE, the role is
// not granted it either.
func Grant(ctx context.Context, pool *pgxpool.Pool, role string) error {
	name := pgx.Identifier{role}.Sanitize()
	return pg.InTx(ctx, pool, func(ctx context.Context, tx pgx.Tx) error {
		var owns bool
		err := tx.QueryRow(ctx, `
			select rolsuper or exists (select from pg_class where relowner = r.oid) from pg_roles r where rolname = $1`, role).Scan(&owns)
		if errors.Is(err, pgx.ErrNoRows) {
			return fault.Newf(fault.NotFound, "role-unknown", "the database has no role %q", role).
				WithNext("make it first: create role " + name + " login password '…'")
		}
		if err != nil {
			return err
		}
		if owns {
			return fault.Newf(fault.Invalid, "role-owns", "%q is a superuser or owns tables of this database, so that no grant could hold it back", role).
				WithNext("name a role of its own for the application")
		}
		grants, err := tableGrants(ctx, tx)
		if err != nil {
			return err
		}
		grants = append(grants, "usage on schema public, "+JobSchema, "usage, select on all sequences in schema public, "+JobSchema)
		for _, g := range grants {
			if _, err := tx.Exec(ctx, "grant "+g+" to "+name); err != nil {
				return fmt.Errorf("grant %s: %w", g, err)
			}
		}
		return nil
	})
}

// Bits of pg_trigger.tgtype (PostgreSQL, src/include/catalog/pg_trigger.h): each row, before, on delete, on update.
const (
	triggerRow    = 1
	triggerBefore = 2
	triggerDelete = 8
	triggerUpdate = 16
)

// tableGrants tells what the application may do with each table. The two tables that say which steps were taken are only read.
func tableGrants(ctx context.Context, tx pgx.Tx) ([]string, error) {
	rows, err := tx.Query(ctx, `
		select case when c.relname in ('schema_done', 'schema_migrations') and c.relnamespace = 'public'::regnamespace then 'select'
		       else 'select, insert'
		         || case when $4::int & refused = 0 then ', update' else '' end
		         || case when $3::int & refused = 0 then ', delete' else '' end
		       end || format(' on %I.%I', c.relnamespace::regnamespace::text, c.relname)
		  from pg_class c, lateral (
		       select coalesce(bit_or(tgtype::int), 0) as refused from pg_trigger
		        where tgrelid = c.oid and not tgisinternal and tgtype::int & ($1::int | $2::int) = $2::int) t
		 where c.relnamespace in ('public'::regnamespace, $5::text::regnamespace) and c.relkind in ('r', 'p')
		 order by c.relname`,
		triggerRow, triggerBefore, triggerDelete, triggerUpdate, JobSchema)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, pgx.RowTo[string])
}
