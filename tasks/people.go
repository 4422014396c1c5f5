package tasks

import (
	"context"
	"slices"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"
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

// Add enters a person. by is a lead's handle, or Operator.
func (pp *People) Add(ctx context.Context, by, handle string, roles []Role) (Person, error) {
	return Person{}, errNotYet
}

// List lists everybody, those who left too, by handle.
func (pp *People) List(ctx context.Context) ([]Person, error) { return nil, errNotYet }

// Get finds a person; unknown handles are fault.NotFound.
func (pp *People) Get(ctx context.Context, handle string) (Person, error) {
	return Person{}, errNotYet
}

// SetRoles replaces a person's roles.
func (pp *People) SetRoles(ctx context.Context, by, handle string, roles []Role) (Person, error) {
	return Person{}, errNotYet
}

// Leave ends a person's time here: their tokens are revoked.
func (pp *People) Leave(ctx context.Context, by, handle string) (Person, error) {
	return Person{}, errNotYet
}
