package ledger_test

import (
	"context"
	"errors"
	"net"
	"sync/atomic"
	"testing"

	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/internal/synth"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
)

// TestALostConnectionLosesAndDoublesNothing cuts the connection while entries are being written: once before the bytes reach
// the database, so that nothing is stored, and once after, so that the entry is stored and nobody is told. Either way the
// ledger finds out what happened, and sending the same draft again leaves exactly one entry.
func TestALostConnectionLosesAndDoublesNothing(t *testing.T) {
	for _, c := range []struct {
		name   string
		fate   int32
		stored bool
	}{
		{"lost on the way", loseWrite, false},
		{"stored but not told", loseAnswer, true},
	} {
		t.Run(c.name, func(t *testing.T) {
			dir := t.TempDir()
			if _, err := synth.WriteTiny(dir, 3, 48); err != nil {
				t.Fatal(err)
			}
			url := pgtest.URL(t)
			pool, fate := fragile(t, url)
			v := ledgertest.Open(t, ledger.New(pool), ledgertest.Import(t, pool, dir))
			t.Cleanup(func() { ledgertest.Reconcile(t, pool) })
			d := &desk{T: t, volume: v, pool: pool}
			for n := range 4 {
				ids, err := v.Base().SupervoxelIDs(t.Context(), pool, []uint32{v.Base().Segment(n).Lo})
				if err != nil {
					t.Fatal(err)
				}
				d.ids = append(d.ids, ids[0])
			}
			d.post(d.merge(d.ids[0], d.ids[1])) // so that statements are prepared and the next post is one write
			draft := d.merge(d.ids[0], d.ids[2])

			fate.Store(c.fate)
			e, err := v.Post(t.Context(), draft)
			fate.Store(loseNothing)
			if c.stored && (err != nil || e.Position != 2) {
				t.Errorf("it was stored: the ledger should have found out, and says %v", err)
			}
			if !c.stored && fault.CodeOf(err) != "post-interrupted" {
				t.Errorf("it was not stored: %v", err)
			}
			again := d.post(draft)
			if again.Position != 2 || again.ID != draft.ID {
				t.Errorf("sent again: position %d", again.Position)
			}
			if head, err := v.Head(t.Context()); err != nil || head != 2 {
				t.Errorf("the head is %d, %v", head, err)
			}
		})
	}
}

// What happens to the next write that carries an entry.
const (
	loseNothing int32 = iota
	loseWrite
	loseAnswer
)

// fragile is a pool whose connections can be told to break.
func fragile(t *testing.T, url string) (*pgxpool.Pool, *atomic.Int32) {
	fate := new(atomic.Int32)
	cfg, err := pgxpool.ParseConfig(url)
	if err != nil {
		t.Fatal(err)
	}
	dial := cfg.ConnConfig.DialFunc
	cfg.ConnConfig.DialFunc = func(ctx context.Context, network, addr string) (net.Conn, error) {
		c, err := dial(ctx, network, addr)
		return &breakable{Conn: c, fate: fate}, err
	}
	pool, err := pgxpool.NewWithConfig(t.Context(), cfg)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(pool.Close)
	return pool, fate
}

type breakable struct {
	net.Conn
	fate *atomic.Int32
	deaf atomic.Bool
}

var errCut = errors.New("the cable was pulled")

// batchBytes tells the write of a group from a look at the head: it carries the canonical bytes.
const batchBytes = 800

func (b *breakable) Write(p []byte) (int, error) {
	if len(p) >= batchBytes {
		switch {
		case b.fate.CompareAndSwap(loseWrite, loseNothing):
			b.Conn.Close()
			return 0, errCut
		case b.fate.CompareAndSwap(loseAnswer, loseNothing):
			b.deaf.Store(true)
		}
	}
	return b.Conn.Write(p)
}

func (b *breakable) Read(p []byte) (int, error) {
	n, err := b.Conn.Read(p)
	if b.deaf.Load() && err == nil {
		b.Conn.Close()
		return 0, errCut
	}
	return n, err
}
