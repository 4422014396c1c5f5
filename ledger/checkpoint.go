package ledger

import (
	"context"
	"crypto/ed25519"
	"crypto/rand"
	"errors"
	"time"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger/proof"
)

// Checkpoint is a head of the ledger's Merkle tree that was signed: the ledger vouches for its first Size entries.
type Checkpoint struct {
	proof.Checkpoint
	Note string // signed, as auditors keep it (C2SP tlog-checkpoint)
	At   time.Time
}

// PublicKey is the key that checkpoints are checked with. It is made when it is first asked for.
func (v *Volume) PublicKey(ctx context.Context) (string, error) {
	seed, err := v.signingSeed(ctx)
	if err != nil {
		return "", err
	}
	return proof.PublicKey(proof.Origin(v.info.Name), seed), nil
}

// signingSeed reads the key, which every process of the house shares, and makes it where there is none.
func (v *Volume) signingSeed(ctx context.Context) (seed []byte, err error) {
	const read = `select seed from checkpoint_key where volume_id = $1`
	err = v.pool.QueryRow(ctx, read, v.info.VolumeID).Scan(&seed)
	if !errors.Is(err, pgx.ErrNoRows) {
		return seed, err
	}
	fresh := make([]byte, ed25519.SeedSize)
	rand.Read(fresh) //nolint:errcheck // never fails
	if _, err := v.pool.Exec(ctx, `
		insert into checkpoint_key (volume_id, seed) values ($1, $2) on conflict do nothing`, v.info.VolumeID, fresh); err != nil {
		return nil, err
	}
	err = v.pool.QueryRow(ctx, read, v.info.VolumeID).Scan(&seed)
	return seed, err
}

// Checkpoint signs the tree of all entries, or returns what was signed when it was of this size. It refuses to sign a tree that
// does not go on from the last one it signed: then somebody has rewritten the entries. O(entries).
func (v *Volume) Checkpoint(ctx context.Context) (Checkpoint, error) {
	last, err := v.LastCheckpoint(ctx)
	if err != nil && fault.KindOf(err) != fault.NotFound {
		return Checkpoint{}, err
	}
	signed := err == nil
	tree, err := v.tree(ctx) // read after the checkpoint, so that it is at least as large
	if err != nil {
		return Checkpoint{}, err
	}
	if signed {
		if root, err := tree.RootAt(last.Size); err != nil || proof.Hash(root) != last.Root {
			return Checkpoint{}, fault.Newf(fault.Conflict, "ledger-rewritten", "the first %d entries of %s are not those that were signed on %s",
				last.Size, v.info.Name, last.At.UTC().Format(time.RFC3339)).WithNext("restore the database from a backup, and verify it with fettle ledger verify")
		}
		if tree.Size() == last.Size {
			return last, nil
		}
	}
	return v.sign(ctx, tree)
}

func (v *Volume) sign(ctx context.Context, tree *proof.Tree) (Checkpoint, error) {
	seed, err := v.signingSeed(ctx)
	if err != nil {
		return Checkpoint{}, err
	}
	head := proof.Checkpoint{Origin: proof.Origin(v.info.Name), Size: tree.Size(), Root: tree.Root()}
	signer, err := proof.Signer(head.Origin, seed)
	if err != nil {
		return Checkpoint{}, err
	}
	note, err := proof.Sign(head, signer)
	if err != nil {
		return Checkpoint{}, err
	}
	if _, err := v.pool.Exec(ctx, `
		insert into checkpoint (volume_id, size, signed_note) values ($1, $2, $3) on conflict do nothing`,
		v.info.VolumeID, head.Size, string(note)); err != nil {
		return Checkpoint{}, err
	}
	return v.LastCheckpoint(ctx)
}

// LastCheckpoint is the checkpoint over the most entries; fault.NotFound when none was made.
func (v *Volume) LastCheckpoint(ctx context.Context) (Checkpoint, error) {
	all, err := v.checkpoints(ctx, `where volume_id = $1 order by size desc limit 1`, v.info.VolumeID)
	if err != nil {
		return Checkpoint{}, err
	}
	if len(all) == 0 {
		return Checkpoint{}, fault.Newf(fault.NotFound, "checkpoint-none", "no checkpoint of %s has been made", v.info.Name).
			WithNext("make one: fettle ledger checkpoint --make")
	}
	return all[0], nil
}

func (v *Volume) checkpoints(ctx context.Context, where string, args ...any) ([]Checkpoint, error) {
	key, err := v.PublicKey(ctx)
	if err != nil {
		return nil, err
	}
	known, err := proof.Verifier(key)
	if err != nil {
		return nil, err
	}
	rows, err := v.pool.Query(ctx, `select signed_note, made_at from checkpoint `+where, args...)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, func(row pgx.CollectableRow) (c Checkpoint, err error) {
		if err := row.Scan(&c.Note, &c.At); err != nil {
			return c, err
		}
		c.Checkpoint, err = proof.Open([]byte(c.Note), proof.Origin(v.info.Name), known)
		return c, err
	})
}

// tree is the Merkle tree of all entries: leaf number n is the entry at position n + 1.
func (v *Volume) tree(ctx context.Context) (*proof.Tree, error) {
	rows, err := v.pool.Query(ctx, `select leaf_hash from entry where volume_id = $1 order by position`, v.info.VolumeID)
	if err != nil {
		return nil, err
	}
	tree := proof.NewTree(nil)
	var leaf []byte
	_, err = pgx.ForEachRow(rows, []any{&leaf}, func() error {
		tree.Append([32]byte(leaf))
		return nil
	})
	return tree, err
}

// Proof is a path in the Merkle tree, and the roots it is about.
type Proof struct {
	Size int64        // of the tree that is proven about; positions up to it
	Root proof.Hash   // of that tree
	Path []proof.Hash // from the leaves upward
}

// ProveEntry proves that an entry is in the tree of the first size entries; size 0 means all. O(entries).
func (v *Volume) ProveEntry(ctx context.Context, position, size int64) (Proof, error) {
	return v.prove(ctx, size, func(t *proof.Tree, size int64) ([]proof.Hash, error) {
		if position < 1 || position > size {
			return nil, fault.Newf(fault.NotFound, "position-unknown", "a tree of %d entries has none at position %d", size, position).
				WithNext("ask about an entry that it covers")
		}
		return t.Inclusion(position-1, size)
	})
}

// ProveGrowth proves that the tree of the first size entries goes on from that of an older size; size 0 means all. O(entries).
func (v *Volume) ProveGrowth(ctx context.Context, older, size int64) (Proof, error) {
	return v.prove(ctx, size, func(t *proof.Tree, size int64) ([]proof.Hash, error) { return t.Consistency(older, size) })
}

func (v *Volume) prove(ctx context.Context, size int64, path func(*proof.Tree, int64) ([]proof.Hash, error)) (Proof, error) {
	tree, err := v.tree(ctx)
	if err != nil {
		return Proof{}, err
	}
	if size == 0 {
		size = tree.Size()
	}
	root, err := tree.RootAt(size)
	if err != nil {
		return Proof{}, err
	}
	p, err := path(tree, size)
	return Proof{Size: size, Root: root, Path: p}, err
}
