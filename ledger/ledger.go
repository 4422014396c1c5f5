package ledger

import (
	"context"
	"errors"
	"sync"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger/base"
)

// ID is a supervoxel's or a segment's id: any 64-bit number, written as decimal text outside the program.
type ID = base.ID

// Channel is the NOTIFY channel on which each group of entries is announced as "volume_id position".
const Channel = "fettle_entry"

// Ledger opens volumes of one database. It is safe for concurrent use.
type Ledger struct {
	pool *pgxpool.Pool

	mu      sync.Mutex
	volumes map[string]*Volume
}

// New returns the ledger of a migrated database. It holds the pool, which the caller closes.
func New(pool *pgxpool.Pool) *Ledger {
	return &Ledger{pool: pool, volumes: make(map[string]*Volume)}
}

// VolumeInfo is one line of the list of volumes.
type VolumeInfo struct {
	Name     string
	Position int64 // last entry's position; 0 when nothing was posted yet
}

// Volumes lists the volumes by name.
func (l *Ledger) Volumes(ctx context.Context) ([]VolumeInfo, error) {
	rows, err := l.pool.Query(ctx, `
		select v.name, coalesce(h.position, 0)
		  from volume v left join head h using (volume_id) order by v.name`)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, pgx.RowToStructByPos[VolumeInfo])
}

// Volume opens a volume by name, or returns the one already open. Opening reads the base's index and every
// current piece, so it costs seconds on a large volume, once a process. Unknown names are fault.NotFound.
func (l *Ledger) Volume(ctx context.Context, name string) (*Volume, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	if v, ok := l.volumes[name]; ok {
		return v, nil
	}
	var id int32
	err := l.pool.QueryRow(ctx, `select volume_id from volume where name = $1`, name).Scan(&id)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, fault.Newf(fault.NotFound, "volume-unknown", "there is no volume %q", name).
			WithNext("list the volumes that were imported")
	}
	if err != nil {
		return nil, err
	}
	v, err := openVolume(ctx, l.pool, id)
	if err != nil {
		return nil, err
	}
	l.volumes[name] = v
	return v, nil
}

// Volume is one open volume: its base and the present state of its ledger. It is safe for concurrent use, by any
// number of processes.
type Volume struct {
	pool   *pgxpool.Pool
	base   *base.Base
	info   base.Info
	digest string // hex, as entries name their base

	mu    sync.RWMutex // guards state; held for writing from a group's first change to its commit
	state *state

	line postLine // callers that wait to post

	pastMu sync.Mutex
	pasts  []*past // positions that were asked about lately
}

func openVolume(ctx context.Context, pool *pgxpool.Pool, id int32) (*Volume, error) {
	b, err := base.Open(ctx, pool, id)
	if err != nil {
		return nil, err
	}
	v := &Volume{pool: pool, base: b, info: b.Info(), digest: b.Info().Digest}
	if _, err := pool.Exec(ctx, `
		insert into head (volume_id, groups) values ($1, $2) on conflict (volume_id) do nothing`,
		id, int64(b.SegmentCount())); err != nil {
		return nil, err
	}
	v.state = newState(b)
	v.mu.Lock()
	defer v.mu.Unlock()
	return v, v.catchUp(ctx)
}

// ID is the volume's internal number: the first key of every table.
func (v *Volume) ID() int32 { return v.info.VolumeID }

// Name is the volume's name.
func (v *Volume) Name() string { return v.info.Name }

// Info tells what was delivered.
func (v *Volume) Info() base.Info { return v.info }

// Base is the immutable base, for readers that go below segments.
func (v *Volume) Base() *base.Base { return v.base }

// Pool is the database of this volume, for followers that keep their own tables beside it.
func (v *Volume) Pool() *pgxpool.Pool { return v.pool }

// Head is the position of the last entry, 0 when there is none.
func (v *Volume) Head(ctx context.Context) (int64, error) {
	var position int64
	err := v.pool.QueryRow(ctx, `select position from head where volume_id = $1`, v.info.VolumeID).Scan(&position)
	return position, err
}

// fresh returns with the read lock held and the state at least as new as the database was when it was called, so
// that every process reads what any process has posted. The caller unlocks.
func (v *Volume) fresh(ctx context.Context) error {
	head, err := v.Head(ctx)
	if err != nil {
		return err
	}
	v.mu.RLock()
	if v.state.position >= head {
		return nil
	}
	v.mu.RUnlock()
	v.mu.Lock()
	err = v.catchUp(ctx)
	v.mu.Unlock()
	if err != nil {
		return err
	}
	v.mu.RLock()
	return nil
}
