package triage

import (
	"cmp"
	"context"
	"runtime"
	"slices"
	"sync"

	"github.com/jackc/pgx/v5"
	"golang.org/x/sync/errgroup"

	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/ledger"
)

// Full judges every current segment and replaces all findings, in one transaction at the end; progress counts supervoxels.
// Entries posted meanwhile are followed afterwards. Memory: the findings, and the largest segment once a processor.
func Full(ctx context.Context, v *ledger.Volume, progress func(done, total int64)) error {
	from, err := Position(ctx, v.Pool(), v)
	if err != nil {
		return err
	}
	j, err := newJudge(ctx, v)
	if err != nil {
		return err
	}
	findings, err := j.all(ctx, progress)
	if err != nil {
		return err
	}
	return pg.InTx(ctx, v.Pool(), func(ctx context.Context, tx pgx.Tx) error {
		if err := move(ctx, tx, v.ID(), from, j.position); err != nil {
			return err
		}
		if _, err := tx.Exec(ctx, `update finding set retired = greatest($2, made) where volume_id = $1 and retired is null`, v.ID(), j.position); err != nil {
			return err
		}
		return store(ctx, tx, v.ID(), j.position, findings)
	})
}

// all looks at every segment, the largest first, so that the last ones to finish are small.
func (j *judge) all(ctx context.Context, progress func(done, total int64)) ([]Finding, error) {
	order := slices.Clone(j.segments)
	slices.SortFunc(order, func(a, b ledger.Segment) int {
		return cmp.Or(-cmp.Compare(a.Supervoxels, b.Supervoxels), cmp.Compare(a.ID, b.ID))
	})
	var mu sync.Mutex
	var out []Finding
	var done int64
	total := j.volume.Info().Supervoxels
	g, ctx := errgroup.WithContext(ctx)
	g.SetLimit(runtime.GOMAXPROCS(0))
	for _, s := range order {
		g.Go(func() error {
			found, err := j.look(ctx, s.ID)
			mu.Lock()
			defer mu.Unlock()
			out = append(out, found...)
			if done += s.Supervoxels; progress != nil {
				progress(done, total)
			}
			return err
		})
	}
	err := g.Wait()
	slices.SortFunc(out, byWorth)
	return out, err
}
