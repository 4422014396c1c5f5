package tasks

import (
	"context"
	"errors"
	"sync"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/ledger"
)

// DefaultLease is how long a claim lasts unless it is extended.
const DefaultLease = 20 * time.Minute

// Queue is the tasks of all volumes of one database. It is safe for concurrent use, by any number of processes: all
// that it knows is in the database.
type Queue struct {
	Lease time.Duration // of a claim; set before use if DefaultLease does not suit

	led     *ledger.Ledger
	pool    *pgxpool.Pool
	volumes sync.Map // name -> int32, which never changes
}

// NewQueue returns the queue of a migrated database.
func NewQueue(led *ledger.Ledger, pool *pgxpool.Pool) *Queue {
	return &Queue{Lease: DefaultLease, led: led, pool: pool}
}

// volume finds a volume's internal number without opening it.
func (q *Queue) volume(ctx context.Context, name string) (int32, error) {
	if id, ok := q.volumes.Load(name); ok {
		return id.(int32), nil
	}
	var id int32
	err := q.pool.QueryRow(ctx, `select volume_id from volume where name = $1`, name).Scan(&id)
	if errors.Is(err, pgx.ErrNoRows) {
		return 0, fault.Newf(fault.NotFound, "volume-unknown", "there is no volume %q", name).
			WithNext("list the volumes that were imported")
	}
	if err == nil {
		q.volumes.Store(name, id)
	}
	return id, err
}

// patience is how often a transaction that PostgreSQL ended to break a deadlock is tried again. Single claims change
// rows in one order; a group of entries with several resolutions in it may not.
const patience = 3

// deadlock is PostgreSQL's code for having been chosen so.
const deadlock = "40P01"

// again runs a transaction, and runs it again if it was chosen to break a deadlock.
func again(fn func() error) error {
	var err error
	for range patience {
		if err = fn(); pg.Code(err) != deadlock {
			break
		}
	}
	return err
}

// lockAlone takes a volume's queue lock for work that moves many tasks. It ends with the transaction.
func lockAlone(ctx context.Context, tx pgx.Tx, volume int32) error {
	_, err := tx.Exec(ctx, `select task_lock_alone($1)`, volume)
	return err
}

// errMoved says that the queue has followed entries since a caller looked.
var errMoved = errors.New("tasks: the queue has moved on")

func queueBusy() error {
	return fault.New(fault.Busy, "queue-busy", "others kept getting in between").WithNext("try again")
}

// alone runs a transaction that has the queue lock to itself, if the queue's position is still the one that the
// caller prepared it for; else errMoved.
func (q *Queue) alone(ctx context.Context, volume int32, seen int64, fn func(ctx context.Context, tx pgx.Tx) error) error {
	return pg.InTx(ctx, q.pool, func(ctx context.Context, tx pgx.Tx) error {
		if err := lockAlone(ctx, tx, volume); err != nil {
			return err
		}
		now, err := position(ctx, tx, volume)
		if err != nil {
			return err
		}
		if now != seen {
			return errMoved
		}
		return fn(ctx, tx)
	})
}

// follower is the queue's name among the ledger's followers.
const follower = "tasks"

// nowhere is the position of a queue that was never filled.
const nowhere = -1

// Position tells how far the queue has followed a volume's ledger, -1 when it was never filled.
func (q *Queue) Position(ctx context.Context, v *ledger.Volume) (int64, error) {
	return position(ctx, q.pool, v.ID())
}

// position tells how far the queue has followed the ledger.
func position(ctx context.Context, db pg.DB, volume int32) (int64, error) {
	var n int64
	err := db.QueryRow(ctx, `select position from follower where volume_id = $1 and name = $2`, volume, follower).Scan(&n)
	if errors.Is(err, pgx.ErrNoRows) {
		return nowhere, nil
	}
	return n, err
}

func onlyFor(p Person, what string, roles ...Role) error {
	if p.Is(roles...) {
		return nil
	}
	return fault.Newf(fault.Forbidden, "role-missing", "%s can't %s: that takes the role %s", p.Handle, what, roles[0]).
		WithNext("ask a lead for the role").WithData("roles", roles)
}
