package tasks

import (
	"bytes"
	"crypto/sha256"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/uuid"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pgtest"
)

func TestTheOperatorMakesTheFirstLeadAndLeadsTheRest(t *testing.T) {
	t.Parallel()
	people := NewPeople(pgtest.New(t))
	lead, err := people.Add(t.Context(), Operator, "rowan", []Role{Lead, Proofreader})
	if err != nil || lead.AddedBy != Operator || !lead.Is(Lead) {
		t.Fatalf("%+v %v", lead, err)
	}
	got, err := people.Add(t.Context(), "rowan", "alder", []Role{Proofreader})
	if err != nil || got.AddedBy != "rowan" {
		t.Fatalf("%+v %v", got, err)
	}
	want(t, first(people.Add(t.Context(), "alder", "birch", nil)), fault.Forbidden, "lead-only")
	want(t, first(people.Add(t.Context(), "nobody", "birch", nil)), fault.Forbidden, "lead-only")
	want(t, first(people.Add(t.Context(), "rowan", "alder", nil)), fault.Conflict, "handle-taken")
	for _, handle := range []string{"", "Alder", "al der", "1alder", "operator", strings.Repeat("a", 41), "älder"} {
		want(t, first(people.Add(t.Context(), "rowan", handle, nil)), fault.Invalid, "handle-malformed")
	}
	want(t, first(people.Add(t.Context(), "rowan", "birch", []Role{"captain"})), fault.Invalid, "role-unknown")

	changed, err := people.SetRoles(t.Context(), "rowan", "alder", []Role{Reviewer, Proofreader, Reviewer})
	if diff := cmp.Diff([]Role{Proofreader, Reviewer}, changed.Roles); err != nil || diff != "" {
		t.Errorf("%v %s", err, diff)
	}
	want(t, first(people.SetRoles(t.Context(), "alder", "alder", []Role{Lead})), fault.Forbidden, "lead-only")
	want(t, first(people.SetRoles(t.Context(), "rowan", "oak", nil)), fault.NotFound, "person-unknown")
	all, err := people.List(t.Context())
	if diff := cmp.Diff([]Person{changed, lead}, all); err != nil || diff != "" {
		t.Errorf("%v %s", err, diff)
	}
}

func TestATokenProvesWhoAsks(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	addTeam(t, pool)
	people := NewPeople(pool)
	secret, token, err := people.IssueToken(t.Context(), "alder", "alder", "laptop")
	if err != nil || !strings.HasPrefix(secret, "fettle_") || len(secret) != len("fettle_")+43 || token.Note != "laptop" || token.LastUsed != nil {
		t.Fatalf("%q %+v %v", secret, token, err)
	}
	p, err := people.Authenticate(t.Context(), secret)
	if diff := cmp.Diff(alder.Roles, p.Roles); err != nil || p.Handle != "alder" || diff != "" {
		t.Errorf("%+v %v", p, err)
	}
	list, err := people.Tokens(t.Context(), "alder")
	if err != nil || len(list) != 1 || list[0].LastUsed == nil {
		t.Errorf("%+v %v", list, err)
	}
	// What is stored is the SHA-256 of the secret and nothing of the secret itself.
	var row string
	var stored []byte
	if err := pool.QueryRow(t.Context(), `select t::text, hash from token t`).Scan(&row, &stored); err != nil {
		t.Fatal(err)
	}
	sum := sha256.Sum256([]byte(secret))
	if !bytes.Equal(stored, sum[:]) || strings.Contains(row, secret[len("fettle_"):]) {
		t.Error("the database holds something else than the hash")
	}
	for _, bad := range []string{"", "fettle_", secret + "x", secret[1:], strings.ToUpper(secret)} {
		_, err := people.Authenticate(t.Context(), bad)
		want(t, err, fault.Unauthenticated, "token-unknown")
	}
}

func TestRevokedTokensAndPeopleWhoLeftDoNotPass(t *testing.T) {
	t.Parallel()
	pool := pgtest.New(t)
	addTeam(t, pool)
	people := NewPeople(pool)
	one, token, err := people.IssueToken(t.Context(), "rowan", "alder", "")
	if err != nil {
		t.Fatal(err)
	}
	two, _, err := people.IssueToken(t.Context(), Operator, "alder", "")
	if err != nil {
		t.Fatal(err)
	}
	_, _, err = people.IssueToken(t.Context(), "birch", "alder", "")
	want(t, err, fault.Forbidden, "lead-only")
	want(t, first(people.RevokeToken(t.Context(), "birch", token.ID)), fault.Forbidden, "lead-only")
	want(t, first(people.RevokeToken(t.Context(), "rowan", uuid.New())), fault.NotFound, "token-unknown")

	revoked, err := people.RevokeToken(t.Context(), "alder", token.ID)
	if err != nil || revoked.Revoked == nil {
		t.Fatalf("%+v %v", revoked, err)
	}
	again, err := people.RevokeToken(t.Context(), "rowan", token.ID)
	if diff := cmp.Diff(revoked, again); err != nil || diff != "" {
		t.Errorf("revoked twice: %v %s", err, diff)
	}
	want(t, first(people.Authenticate(t.Context(), one)), fault.Unauthenticated, "token-unknown")
	if _, err := people.Authenticate(t.Context(), two); err != nil {
		t.Errorf("the other token: %v", err)
	}

	gone, err := people.Leave(t.Context(), "rowan", "alder")
	if err != nil || !gone.Left || gone.Is(Proofreader) {
		t.Errorf("%+v %v", gone, err)
	}
	want(t, first(people.Authenticate(t.Context(), two)), fault.Unauthenticated, "token-unknown")
	_, _, err = people.IssueToken(t.Context(), "rowan", "alder", "")
	want(t, err, fault.Conflict, "person-left")
	if got, err := people.Get(t.Context(), "alder"); err != nil || !got.Left {
		t.Errorf("the register keeps them: %+v %v", got, err)
	}
}
