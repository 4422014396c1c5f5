package ledgertest

import (
	"context"
	"testing"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/migrations"
)

// AsApplication connects to the same database in a role that owns nothing and is granted what the application needs.
func AsApplication(t testing.TB, owner *pgxpool.Pool) *pgxpool.Pool {
	t.Helper()
	role := "app_" + uuid.NewString()[:8]
	exec := func(sql string) {
		t.Helper()
		if _, err := owner.Exec(context.WithoutCancel(t.Context()), sql); err != nil {
			t.Errorf("%s: %v", sql, err)
		}
	}
	exec(`create role ` + role)
	t.Cleanup(func() {
		exec(`drop owned by ` + role)
		exec(`drop role ` + role)
	})
	if err := migrations.Grant(t.Context(), owner, role); err != nil {
		t.Fatal(err)
	}
	cfg := owner.Config()
	cfg.ConnConfig.RuntimeParams["role"] = role
	pool, err := pgxpool.NewWithConfig(t.Context(), cfg)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(pool.Close)
	return pool
}
