package tasks

import (
	"context"
	"errors"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/ledger"
)

var errNotYet = errors.New("not yet")

// DefaultLease is how long a claim lasts unless it is extended.
const DefaultLease = 20 * time.Minute

// Queue is the tasks of all volumes of one database.
type Queue struct {
	Lease time.Duration // of a claim; DefaultLease unless set before use

	led  *ledger.Ledger
	pool *pgxpool.Pool
}

// NewQueue returns the queue of a migrated database.
func NewQueue(led *ledger.Ledger, pool *pgxpool.Pool) *Queue {
	return &Queue{Lease: DefaultLease, led: led, pool: pool}
}

// ClaimOptions narrow down what a person wants. Zero fields narrow nothing.
type ClaimOptions struct {
	Task     int64 // this one and no other
	Kinds    []string
	Families []string
	ID       uuid.UUID // the claim's own id, made by the caller, version 7: the same id again gets the same answer
}

// Claim takes the next best task, or the one named. Empty queue: fault.NotFound "queue-empty".
func (q *Queue) Claim(ctx context.Context, volume string, p Person, opt ClaimOptions) (Task, error) {
	return Task{}, errNotYet
}

// Held lists the tasks in a person's hands.
func (q *Queue) Held(ctx context.Context, volume string, p Person) ([]Task, error) {
	return nil, errNotYet
}

// Release gives a task back.
func (q *Queue) Release(ctx context.Context, p Person, claim uuid.UUID, reason string) (Task, error) {
	return Task{}, errNotYet
}

// Extend gives a live claim a whole lease again, from now.
func (q *Queue) Extend(ctx context.Context, p Person, claim uuid.UUID) (Claim, error) {
	return Claim{}, errNotYet
}

// Expire gives back every task whose claim ran out, and says how many.
func (q *Queue) Expire(ctx context.Context) (int, error) { return 0, errNotYet }

// Resolve is how a person ends a task.
type Resolve struct {
	Outcome string
	Note    string
	Draft   *ledger.Draft // of the correction: Merge or Split, Expected, Agent. ID, Person and Task are filled in here
}

// Resolve ends a claim with an outcome; a correction's entry commits together with it. The same claim and outcome
// again get the same answer.
func (q *Queue) Resolve(ctx context.Context, p Person, claim uuid.UUID, r Resolve) (Task, *ledger.Entry, error) {
	return Task{}, nil, errNotYet
}

// Review accepts or returns a resolution. Returning a correction posts its reversal, which is the entry in the answer.
func (q *Queue) Review(ctx context.Context, volume string, number int64, p Person, verdict, note string) (Task, *ledger.Entry, error) {
	return Task{}, nil, errNotYet
}

// ToReview lists what a person may review, oldest first: resolved tasks, their own left out.
func (q *Queue) ToReview(ctx context.Context, volume string, p Person, limit int) ([]Task, error) {
	return nil, errNotYet
}

// Assign gives open tasks to a person, and returns how many. Only that person can claim them.
func (q *Queue) Assign(ctx context.Context, volume string, lead Person, to string, numbers []int64) (int, error) {
	return 0, errNotYet
}

// AssignBest gives the n best open tasks that nobody has been given, of a kind and family if named, to a person.
func (q *Queue) AssignBest(ctx context.Context, volume string, lead Person, to string, n int, kind, family string) ([]int64, error) {
	return nil, errNotYet
}

// Unassign gives assigned tasks back to everybody, and returns how many.
func (q *Queue) Unassign(ctx context.Context, volume string, lead Person, numbers []int64) (int, error) {
	return 0, errNotYet
}

// Post appends a correction that belongs to no task. It is refused while somebody else holds a claim on a segment.
func (q *Queue) Post(ctx context.Context, volume string, p Person, d ledger.Draft) (ledger.Entry, error) {
	return ledger.Entry{}, errNotYet
}

// Filter chooses tasks. Zero fields choose all.
type Filter struct {
	State      string
	Kind       string
	Family     string
	AssignedTo string
	Person     string // who holds or resolved it
	Segment    *ledger.ID
	Cursor     string // as a former page returned it
	Limit      int    // 0: 100; at most 1000
}

// List lists tasks, best first, a page at a time; next is "" at the end.
func (q *Queue) List(ctx context.Context, volume string, f Filter) (page []Task, next string, err error) {
	return nil, "", errNotYet
}

// Get finds a task by its number.
func (q *Queue) Get(ctx context.Context, volume string, number int64) (Task, error) {
	return Task{}, errNotYet
}

// Event is one line of a task's history.
type Event struct {
	At     time.Time
	Task   int64
	Person string // "" when the program did it
	What   string // made, claimed, released, expired, extended, resolved, accepted, returned, assigned, unassigned, moved, overtaken
	Note   string
}

// History lists what happened to a task, oldest first.
func (q *Queue) History(ctx context.Context, volume string, number int64) ([]Event, error) {
	return nil, errNotYet
}

// Follow brings the tasks up to where triage has read, and returns that position.
func (q *Queue) Follow(ctx context.Context, v *ledger.Volume) (position int64, err error) {
	return 0, errNotYet
}

// Fill makes a task of every place that has none, and returns how many.
func (q *Queue) Fill(ctx context.Context, v *ledger.Volume) (made int, err error) {
	return 0, errNotYet
}

// QueueStatus is where a volume's work stands.
type QueueStatus struct {
	States  map[string]int // tasks by state
	Open    []OpenKind     // what waits
	Holders []Holder       // who works on what, by handle: personal data
	Minutes float64        // expected, of all open tasks
	Lag     int64          // entries that the queue has not followed yet
}

// OpenKind counts open tasks of one kind and family.
type OpenKind struct {
	Kind, Family string
	Tasks        int
	Ready        int // of them, at the head of every line
	Minutes      float64
	Gain         float64
}

// Holder is a person with a live claim.
type Holder struct {
	Person    string
	Task      int64
	Kind      string
	At, Until time.Time
}

// Status says where a volume's work stands.
func (q *Queue) Status(ctx context.Context, volume string) (QueueStatus, error) {
	return QueueStatus{}, errNotYet
}

// ThroughputFilter chooses claims by person and by the time they ended.
type ThroughputFilter struct {
	Person   string         // "" is everybody
	From, To time.Time      // To is excluded; zero: no bound
	Zone     *time.Location // whose midnights part the days; nil is UTC
}

// Throughput is one person's work of one day. It is personal data.
type Throughput struct {
	Person      string
	Day         time.Time // its first instant in the zone asked for
	Resolved    int       // tasks
	Corrected   int
	Sound       int
	Unclear     int
	Released    int
	Expired     int
	ActiveHours float64
	PerHour     float64 // tasks an active hour; 0 when there was none
	Kinds       []KindTime
	Reviewed    int // of the tasks resolved that day
	Accepted    int
	Returned    int
	Share       float64 // accepted of reviewed; with its 95 % Wilson interval. All 0 when Reviewed is
	ShareLo     float64
	ShareHi     float64
}

// KindTime is how long tasks of one kind take, by Kaplan and Meier: a claim that ended without an outcome tells only
// that the task would have taken longer.
type KindTime struct {
	Kind     string
	Resolved int
	Censored int     // released, ran out, overtaken, or still going on
	Median   float64 // minutes; 0 when not reached
	Reached  bool    // whether half of them ended with an outcome
}

// Throughput tells each person's work by day, newest day first.
func (q *Queue) Throughput(ctx context.Context, volume string, f ThroughputFilter) ([]Throughput, error) {
	return nil, errNotYet
}
