package base

import (
	"context"
	"encoding/hex"
	"encoding/json"
	"fmt"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// refuseTaken says early what the database would say at the end.
func (im *importer) refuseTaken(pool *pgxpool.Pool) error {
	var taken bool
	err := pool.QueryRow(im.ctx, `select exists (select from volume where name = $1)`, im.info.Name).Scan(&taken)
	if err == nil && taken {
		return im.taken()
	}
	return err
}

func (im *importer) taken() error {
	return fault.Newf(fault.Conflict, "volume-exists", "there is a volume %s already", im.info.Name).
		WithNext("a volume is never imported over another: import under another name")
}

// store writes everything in one transaction. A crash before its commit leaves nothing.
func (im *importer) store(pool *pgxpool.Pool) error {
	err := pg.InTx(im.ctx, pool, func(ctx context.Context, tx pgx.Tx) error {
		if err := tx.QueryRow(ctx, `select nextval(pg_get_serial_sequence('volume', 'volume_id'))::int`).Scan(&im.info.VolumeID); err != nil {
			return err
		}
		digest := newDigester()
		for _, step := range []func(context.Context, pgx.Tx, *digester) error{im.storeBlocks, im.storeSynapses, im.storeNuclei, im.storeVolume} {
			if err := step(ctx, tx, digest); err != nil {
				return err
			}
		}
		return nil
	})
	switch {
	case pg.Constraint(err) == "volume_name":
		return im.taken()
	case err != nil && im.ctx.Err() != nil: // what the connection says then is only how it ended
		return fmt.Errorf("the import was ended: %w", im.ctx.Err())
	}
	return err
}

func (im *importer) storeVolume(ctx context.Context, tx pgx.Tx, digest *digester) error {
	i := &im.info
	sum := digest.sum(i)
	i.Digest = hex.EncodeToString(sum[:])
	seams, err := json.Marshal(i.Seams)
	if err != nil {
		return err
	}
	gaps, err := json.Marshal(i.Gaps)
	if err != nil {
		return err
	}
	b := i.Bounds
	_, err = tx.Exec(ctx, `
		insert into volume (volume_id, name, voxel_nm, bounds_nm, seams, gaps, supervoxels, segments, contacts, rejected,
		                    assumed, synapses, nuclei, truth, has_truth, digest, mint_from, layout)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16, $17, $18)`,
		i.VolumeID, i.Name, i.VoxelNM[:], append(b.Min[:], b.Max[:]...), seams, gaps, i.Supervoxels, i.Segments, i.Contacts, i.Rejected,
		i.Assumed, i.Synapses, i.Nuclei, i.Truth, i.HasTruth, sum[:], i.MintFrom, i.Layout)
	return err
}

func (im *importer) storeSynapses(ctx context.Context, tx pgx.Tx, digest *digester) error {
	m, err := im.synapses.sorted()
	if err != nil {
		return err
	}
	defer m.close()
	var s synapseRecord
	n := int64(0)
	_, err = tx.CopyFrom(ctx, pgx.Identifier{"base_synapse"},
		[]string{"volume_id", "synapse_id", "pre", "post", "x_nm", "y_nm", "z_nm", "confidence", "transmitter"},
		pgx.CopyFromFunc(func() ([]any, error) {
			if n++; n%lookUp == 0 {
				im.progress("storing synapses", n, im.info.Synapses, "synapses")
			}
			if ok, err := m.next(&s); !ok || err != nil {
				return nil, err
			}
			transmitter := im.transmitters[s.transmitter]
			digest.synapse(&s, transmitter)
			var t any
			if transmitter != "" {
				t = transmitter
			}
			return []any{im.info.VolumeID, int64(s.id), int64(s.pre), int64(s.post), s.at[0], s.at[1], s.at[2], s.confidence, t}, nil
		}))
	if err != nil {
		return err
	}
	_, err = tx.Exec(ctx, `analyze base_synapse`)
	return err
}

func (im *importer) storeNuclei(ctx context.Context, tx pgx.Tx, digest *digester) error {
	_, err := tx.CopyFrom(ctx, pgx.Identifier{"base_nucleus"},
		[]string{"volume_id", "nucleus_id", "supervoxel", "x_nm", "y_nm", "z_nm", "volume_nm3"},
		pgx.CopyFromSlice(len(im.nuclei), func(i int) ([]any, error) {
			n := &im.nuclei[i]
			digest.nucleus(n)
			return []any{im.info.VolumeID, int64(n.id), int64(n.at), n.point[0], n.point[1], n.point[2], n.volume}, nil
		}))
	return err
}

// storeBlocks packs and stores the sections, block by block.
func (im *importer) storeBlocks(ctx context.Context, tx pgx.Tx, digest *digester) error {
	m, err := im.halves.sorted()
	if err != nil {
		return err
	}
	defer m.close()
	p := &packer{im: im, digest: digest, halves: m}
	if p.more, err = m.next(&p.half); err != nil {
		return err
	}
	_, err = tx.CopyFrom(ctx, pgx.Identifier{"base_block"}, []string{"volume_id", "section", "number", "data"}, pgx.CopyFromFunc(p.next))
	return err
}
