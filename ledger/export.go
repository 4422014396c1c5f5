package ledger

import (
	"context"
	"io"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/ledger/proof"
)

// Export writes the whole ledger in a form that proof.VerifyLog checks without this program's database: the bytes that were hashed,
// in order, and every checkpoint. It makes a checkpoint first and ends with it, so that each entry in the export is covered.
func (v *Volume) Export(ctx context.Context, w io.Writer) error {
	head, err := v.Checkpoint(ctx)
	if err != nil {
		return err
	}
	key, err := v.PublicKey(ctx)
	if err != nil {
		return err
	}
	err = proof.WriteHeader(w, proof.LogHeader{Format: proof.LogFormat, Key: key, Size: itoa(head.Size),
		Volume: proof.LogVolume{Digest: v.digest, Name: v.info.Name}})
	if err != nil {
		return err
	}
	rows, err := v.pool.Query(ctx, `
		select content from entry where volume_id = $1 and position <= $2 order by position`, v.info.VolumeID, head.Size)
	if err != nil {
		return err
	}
	var content []byte
	if _, err := pgx.ForEachRow(rows, []any{&content}, func() error { return proof.WriteEntry(w, content) }); err != nil {
		return err
	}
	made, err := v.checkpoints(ctx, `where volume_id = $1 and size <= $2 order by size`, v.info.VolumeID, head.Size)
	if err != nil {
		return err
	}
	for _, c := range made {
		if err := proof.WriteCheckpoint(w, c.Note); err != nil {
			return err
		}
	}
	return nil
}
