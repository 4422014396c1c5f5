package ledger_test

import (
	"fmt"
	"testing"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
	"fettle.example/fettle/migrations"
)

// insufficientPrivilege is PostgreSQL's code for what a role may not do.
const insufficientPrivilege = "42501"

// asApplication is the desk as the application's role sees it, which owns nothing.
func (d *desk) asApplication() *desk {
	d.Helper()
	pool := ledgertest.AsApplication(d, d.pool)
	return &desk{T: d.T, pool: pool, ids: d.ids, volume: ledgertest.Open(d, ledger.New(pool), d.volume.Name())}
}

// TestTheApplicationsRoleCanOnlyAppend does the ledger's work as that role, and then tries everything else.
func TestTheApplicationsRoleCanOnlyAppend(t *testing.T) {
	app := newDesk(t).asApplication()
	if err := migrations.Up(t.Context(), app.pool); err != nil {
		t.Errorf("a database that is up to date needs no owner: %v", err)
	}
	app.post(app.merge(app.ids[0], app.ids[1]))
	app.post(app.merge(app.ids[2], app.ids[3]))
	app.post(app.reversal(2, app.segment(app.ids[2])))
	app.checkpoint()
	if _, err := app.volume.AddNeuron(t.Context(), "LN1", app.ids[0], "rowan"); err != nil {
		t.Error(err)
	}
	final := map[string]string{"entry": "reason = 'x'", "checkpoint": "size = 9", "checkpoint_key": "made_at = now()", "volume": "name = 'x'",
		"base_block": "number = 9", "base_synapse": "x_nm = 0", "base_nucleus": "x_nm = 0", "schema_done": "version = 1"}
	for table, set := range final {
		for _, sql := range []string{
			fmt.Sprintf(`update %s set %s`, table, set), `delete from ` + table, `truncate ` + table + ` cascade`,
			`alter table ` + table + ` disable trigger all`, `drop table ` + table + ` cascade`,
		} {
			if _, err := app.pool.Exec(t.Context(), sql); pg.Code(err) != insufficientPrivilege {
				t.Errorf("%s: %v", sql, err)
			}
		}
	}
	for _, sql := range []string{`set session_replication_role = replica`, `drop function entry_is_final() cascade`, `create table mine ()`,
		`create or replace function public.entry_is_final() returns trigger language plpgsql as 'begin return new; end'`} {
		if _, err := app.pool.Exec(t.Context(), sql); pg.Code(err) != insufficientPrivilege {
			t.Errorf("%s: %v", sql, err)
		}
	}
}

func TestGrantIsForRolesThatItCanHoldBack(t *testing.T) {
	d := newDesk(t)
	d.refused(migrations.Grant(t.Context(), d.pool, "nobody_at_all"), fault.NotFound, "role-unknown")
	d.refused(migrations.Grant(t.Context(), d.pool, d.pool.Config().ConnConfig.User), fault.Invalid, "role-owns")
}
