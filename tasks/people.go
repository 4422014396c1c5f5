package tasks

import (
	"context"
	"errors"
	"regexp"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// Role is what a person may do. Somebody without roles may read.
type Role string

// Roles.
const (
	Proofreader Role = "proofreader" // claims and resolves tasks, posts corrections
	Reviewer    Role = "reviewer"    // accepts and returns the resolutions of others
	Lead        Role = "lead"        // assigns, adds people, reviews, posts
	Agent       Role = "agent"       // a machine account that posts under its own name
)

// Roles are all there are.
var Roles = []Role{Proofreader, Reviewer, Lead, Agent}

// Operator stands for whoever holds the machine, in place of a person: they make the first lead.
const Operator = "operator"

// Person is somebody who works here.
type Person struct {
	Handle  string // lower case; signs entries, so it is never given to anybody else
	Roles   []Role
	AddedBy string
	AddedAt time.Time
	Left    bool // no longer here: can't sign in, and stays in the records
}

// Is says whether a person who is still here has any of some roles.
func (p Person) Is(roles ...Role) bool {
	return !p.Left && slices.ContainsFunc(p.Roles, func(r Role) bool { return slices.Contains(roles, r) })
}

// People is the register of persons and their tokens.
type People struct{ pool *pgxpool.Pool }

// NewPeople returns the register of a migrated database.
func NewPeople(pool *pgxpool.Pool) *People { return &People{pool: pool} }

const personColumns = `handle, roles, coalesce(added_by, 'operator'), added_at, left_at is not null`

func scanPerson(row pgx.CollectableRow) (p Person, err error) {
	err = row.Scan(&p.Handle, &p.Roles, &p.AddedBy, &p.AddedAt, &p.Left)
	return p, err
}

// handleForm is the database's person_handle, checked here first for the sake of the answer.
var handleForm = regexp.MustCompile(`^[a-z][a-z0-9-]{0,39}$`)

// Add enters a person. by is a lead's handle, or Operator.
func (pp *People) Add(ctx context.Context, by, handle string, roles []Role) (Person, error) {
	if !handleForm.MatchString(handle) || handle == Operator {
		return Person{}, fault.Newf(fault.Invalid, "handle-malformed", "%q is not a handle", handle).WithField("handle").
			WithNext("choose up to 40 lower-case letters, digits and dashes, a letter first, and not \"operator\"")
	}
	if err := checkRoles(roles); err != nil {
		return Person{}, err
	}
	if err := pp.mayManage(ctx, by, ""); err != nil {
		return Person{}, err
	}
	p, err := pp.one(ctx, `
		insert into person (handle, roles, added_by) values ($1, $2, nullif($3, 'operator')) returning `+personColumns,
		handle, texts(roles), by)
	if pg.Constraint(err) == "person_pkey" {
		return p, fault.Newf(fault.Conflict, "handle-taken", "there is a person %s already", handle).WithField("handle").
			WithNext("choose another handle; one that signed entries is never given away")
	}
	return p, err
}

// List lists everybody, those who left too, by handle.
func (pp *People) List(ctx context.Context) ([]Person, error) {
	rows, err := pp.pool.Query(ctx, `select `+personColumns+` from person order by handle`)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, scanPerson)
}

// Get finds a person; unknown handles are fault.NotFound.
func (pp *People) Get(ctx context.Context, handle string) (Person, error) {
	return known(handle)(pp.one(ctx, `select `+personColumns+` from person where handle = $1`, handle))
}

// SetRoles replaces a person's roles.
func (pp *People) SetRoles(ctx context.Context, by, handle string, roles []Role) (Person, error) {
	if err := checkRoles(roles); err != nil {
		return Person{}, err
	}
	if err := pp.mayManage(ctx, by, ""); err != nil {
		return Person{}, err
	}
	return known(handle)(pp.one(ctx, `update person set roles = $2 where handle = $1 returning `+personColumns, handle, texts(roles)))
}

// Leave ends a person's time here: their tokens are revoked, and what they did stays. A claim they hold runs out, and
// what was assigned to them waits until a lead gives it to somebody else.
func (pp *People) Leave(ctx context.Context, by, handle string) (Person, error) {
	if err := pp.mayManage(ctx, by, ""); err != nil {
		return Person{}, err
	}
	return known(handle)(pp.one(ctx, `
		with revoked as (
		     update token set revoked_at = now(), revoked_by = nullif($2, 'operator') where handle = $1 and revoked_at is null)
		update person set left_at = coalesce(left_at, now()) where handle = $1 returning `+personColumns, handle, by))
}

// mayManage refuses who is neither the operator, nor a lead, nor the one named.
func (pp *People) mayManage(ctx context.Context, by, themselves string) error {
	if by == Operator || by == themselves && by != "" {
		return nil
	}
	p, err := pp.Get(ctx, by)
	if err != nil && fault.KindOf(err) != fault.NotFound {
		return err
	}
	if !p.Is(Lead) {
		return fault.Newf(fault.Forbidden, "lead-only", "only a lead manages people, and %s is none", by).
			WithNext("ask a lead")
	}
	return nil
}

func (pp *People) one(ctx context.Context, sql string, args ...any) (Person, error) {
	rows, err := pp.pool.Query(ctx, sql, args...)
	if err != nil {
		return Person{}, err
	}
	return pgx.CollectExactlyOneRow(rows, scanPerson)
}

// known turns the absence of a person into the answer about it.
func known(handle string) func(Person, error) (Person, error) {
	return func(p Person, err error) (Person, error) {
		if errors.Is(err, pgx.ErrNoRows) {
			return p, unknownPerson(handle)
		}
		return p, err
	}
}

func unknownPerson(handle string) error {
	return fault.Newf(fault.NotFound, "person-unknown", "there is no person %q", handle).WithNext("list the people")
}

func checkRoles(roles []Role) error {
	for _, r := range roles {
		if !slices.Contains(Roles, r) {
			return fault.Newf(fault.Invalid, "role-unknown", "there is no role %q", string(r)).WithField("roles").
				WithNext("the roles are proofreader, reviewer, lead and agent")
		}
	}
	return nil
}

func texts(roles []Role) []string {
	out := make([]string, 0, len(roles))
	for _, r := range roles {
		out = append(out, string(r))
	}
	slices.Sort(out)
	return slices.Compact(out)
}
