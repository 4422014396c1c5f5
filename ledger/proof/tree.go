package proof

import (
	"encoding/hex"
	"fmt"

	"golang.org/x/mod/sumdb/tlog"

	"fettle.example/fettle/internal/fault"
)

// Hash is SHA-256; as text, lower-case hex.
type Hash [32]byte

// String is the hash in lower-case hex.
func (h Hash) String() string { return hex.EncodeToString(h[:]) }

// MarshalText writes lower-case hex.
func (h Hash) MarshalText() ([]byte, error) { return hex.AppendEncode(nil, h[:]), nil }

// UnmarshalText reads hex of exactly 32 bytes.
func (h *Hash) UnmarshalText(text []byte) error {
	b, err := hex.DecodeString(string(text))
	if err != nil || len(b) != len(h) {
		return fault.Newf(fault.Invalid, "hash-malformed", "%.80q is not a SHA-256 hash", text).WithNext("give 64 hexadecimal digits")
	}
	*h = Hash(b)
	return nil
}

// LeafHash is the hash of a leaf: SHA-256 over 0x00 and the bytes (RFC 6962, section 2.1).
func LeafHash(b []byte) [32]byte { return tlog.RecordHash(b) }

// Root is the head of the tree over some leaf hashes; of none, the SHA-256 of nothing.
func Root(leaves [][32]byte) [32]byte { return NewTree(leaves).Root() }

// Tree is a Merkle tree in memory: 64 bytes a leaf. The tree of any smaller size is inside it.
type Tree struct {
	size   int64
	hashes []tlog.Hash // complete subtrees, in the order of tlog's stored hashes
}

// NewTree makes the tree over some leaf hashes.
func NewTree(leaves [][32]byte) *Tree {
	t := &Tree{hashes: make([]tlog.Hash, 0, tlog.StoredHashCount(int64(len(leaves))))}
	for _, l := range leaves {
		t.Append(l)
	}
	return t
}

// Size is the number of leaves.
func (t *Tree) Size() int64 { return t.size }

// Append adds a leaf.
func (t *Tree) Append(leaf [32]byte) {
	more, err := tlog.StoredHashesForRecordHash(t.size, leaf, t)
	must(err)
	t.hashes = append(t.hashes, more...)
	t.size++
}

// ReadHashes serves tlog's proofs.
func (t *Tree) ReadHashes(indexes []int64) ([]tlog.Hash, error) {
	out := make([]tlog.Hash, len(indexes))
	for i, k := range indexes {
		if k < 0 || k >= int64(len(t.hashes)) {
			return nil, fmt.Errorf("stored hash %d of %d", k, len(t.hashes))
		}
		out[i] = t.hashes[k]
	}
	return out, nil
}

// Root is the head of the whole tree.
func (t *Tree) Root() [32]byte {
	root, err := tlog.TreeHash(t.size, t)
	must(err)
	return root
}

// RootAt is the head that the tree had when it was of a smaller size.
func (t *Tree) RootAt(size int64) ([32]byte, error) {
	if size < 0 || size > t.size {
		return [32]byte{}, outside(size, t.size)
	}
	root, err := tlog.TreeHash(size, t)
	must(err)
	return root, nil
}

// Inclusion proves that leaf number index, from 0, is in the tree of a size: the siblings from the leaf to the root.
func (t *Tree) Inclusion(index, size int64) ([]Hash, error) {
	if size > t.size {
		return nil, outside(size, t.size)
	}
	if index < 0 || index >= size {
		return nil, fault.Newf(fault.Invalid, "leaf-outside", "a tree of %d leaves has no leaf %d", size, index).
			WithNext("count leaves from 0")
	}
	p, err := tlog.ProveRecord(size, index, t)
	must(err)
	return plain(p), nil
}

// Consistency proves that the tree of a size goes on from that of an older size: nothing in it was changed or taken away.
func (t *Tree) Consistency(older, size int64) ([]Hash, error) {
	if size > t.size {
		return nil, outside(size, t.size)
	}
	if older < 0 || older > size {
		return nil, outside(older, size)
	}
	if older == 0 || older == size {
		return []Hash{}, nil // every tree goes on from the empty one, and from itself
	}
	p, err := tlog.ProveTree(size, older, t)
	must(err)
	return plain(p), nil
}

// CheckInclusion says whether a proof shows that a leaf hash is leaf number index of the tree with that size and root.
func CheckInclusion(path []Hash, index, size int64, leaf, root [32]byte) error {
	if index < 0 || index >= size {
		return outside(index, size)
	}
	if err := tlog.CheckRecord(tlogPath(path), size, root, index, leaf); err != nil {
		return fault.Newf(fault.Invalid, "inclusion-unproven", "the proof does not show that leaf %d is in the tree of %d leaves", index, size).Wrap(err)
	}
	return nil
}

// CheckConsistency says whether a proof shows that the tree (size, root) goes on from the tree (older, olderRoot).
func CheckConsistency(path []Hash, older, size int64, olderRoot, root [32]byte) error {
	if older < 0 || older > size {
		return outside(older, size)
	}
	var ok bool
	var cause error
	switch {
	case older == 0:
		ok = len(path) == 0 && olderRoot == Root(nil) && (size > 0 || root == olderRoot)
	case older == size:
		ok = len(path) == 0 && olderRoot == root
	default:
		cause = tlog.CheckTree(tlogPath(path), size, root, older, olderRoot)
		ok = cause == nil
	}
	if !ok {
		return fault.Newf(fault.Conflict, "consistency-unproven", "the proof does not show that the tree of %d leaves goes on from that of %d", size, older).Wrap(cause)
	}
	return nil
}

func outside(size, of int64) error {
	return fault.Newf(fault.Invalid, "size-outside", "size or leaf %d does not fit a tree of %d leaves", size, of).
		WithNext("ask about a tree that is not larger than the log")
}

func plain[P ~[]tlog.Hash](p P) []Hash {
	out := make([]Hash, len(p))
	for i, h := range p {
		out[i] = Hash(h)
	}
	return out
}

func tlogPath(p []Hash) []tlog.Hash {
	out := make([]tlog.Hash, len(p))
	for i, h := range p {
		out[i] = tlog.Hash(h)
	}
	return out
}

// must holds what can't fail: the tree has every hash that tlog asks it for.
func must(err error) {
	if err != nil {
		panic("proof: " + err.Error())
	}
}
