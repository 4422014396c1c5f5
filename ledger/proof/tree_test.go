package proof

import (
	"encoding/hex"
	"encoding/json"
	"fmt"
	"os"
	"slices"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/transparency-dev/merkle/proof"
	"github.com/transparency-dev/merkle/rfc6962"
	"pgregory.net/rapid"
)

// vectors are leaves, roots and proofs for sizes 0 to 8 from transparency-dev/merkle v0.0.2.
type vectors struct {
	Leaves    []string `json:"leaf_inputs_hex"`
	Roots     []Hash   `json:"roots_by_size"`
	Inclusion []struct {
		Size, Index    int64
		LeafHash, Root Hash
		Path           []Hash
	} `json:"inclusion"`
	Consistency []struct {
		Size1, Size2 int64
		Root1, Root2 Hash
		Path         []Hash
	} `json:"consistency"`
}

func readVectors(t *testing.T) (v vectors, leaves [][32]byte) {
	t.Helper()
	text, err := os.ReadFile("../../testdata/checks/rfc6962_merkle_vectors.json")
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(text, &v); err != nil {
		t.Fatal(err)
	}
	if len(v.Roots) != 9 || len(v.Inclusion) != 36 || len(v.Consistency) != 36 {
		t.Fatal("vectors are not whole")
	}
	for _, l := range v.Leaves {
		data, err := hex.DecodeString(l)
		if err != nil {
			t.Fatal(err)
		}
		leaves = append(leaves, LeafHash(data))
	}
	return v, leaves
}

func TestRootsAreThoseOfRFC6962(t *testing.T) {
	v, leaves := readVectors(t)
	whole := NewTree(leaves)
	for size, want := range v.Roots {
		if got := Hash(Root(leaves[:size])); got != want {
			t.Errorf("size %d: %s, want %s", size, got, want)
		}
		if got, err := whole.RootAt(int64(size)); err != nil || Hash(got) != want {
			t.Errorf("the tree when it had %d leaves: %s, %v; want %s", size, Hash(got), err, want)
		}
	}
}

func TestProofsAreThoseOfRFC6962(t *testing.T) {
	v, leaves := readVectors(t)
	tree := NewTree(leaves)
	for _, c := range v.Inclusion {
		path, err := tree.Inclusion(c.Index, c.Size)
		if err != nil || !slices.Equal(path, c.Path) {
			t.Errorf("leaf %d of %d: %v, %v", c.Index, c.Size, path, err)
		}
		if err := CheckInclusion(c.Path, c.Index, c.Size, c.LeafHash, c.Root); err != nil {
			t.Errorf("leaf %d of %d: %v", c.Index, c.Size, err)
		}
	}
	for _, c := range v.Consistency {
		path, err := tree.Consistency(c.Size1, c.Size2)
		if err != nil || !slices.Equal(path, c.Path) {
			t.Errorf("%d to %d: %v, %v", c.Size1, c.Size2, path, err)
		}
		if err := CheckConsistency(c.Path, c.Size1, c.Size2, c.Root1, c.Root2); err != nil {
			t.Errorf("%d to %d: %v", c.Size1, c.Size2, err)
		}
	}
}

// The example of RFC 6962, section 2.1.3, over the leaves "d0" … "d6". Paths as drawn there; the root from tlog.
func TestExampleOfRFC6962(t *testing.T) {
	var d [][32]byte
	for i := range 7 {
		d = append(d, LeafHash(fmt.Appendf(nil, "d%d", i)))
	}
	over := func(lo, hi int) Hash { return Root(d[lo:hi]) }
	b, c, f, j := Hash(d[1]), Hash(d[2]), Hash(d[5]), Hash(d[6])
	g, h, i, k, l := over(0, 2), over(2, 4), over(4, 6), over(0, 4), over(4, 7)
	tree := NewTree(d)
	if root := Hash(tree.Root()).String(); root != "73a590fb266b81557040b146b9d479e2a1b5849b125167642f5b64866f1d5c7d" {
		t.Errorf("root %s", root)
	}
	for index, want := range map[int64][]Hash{0: {b, h, l}, 3: {c, g, l}, 4: {f, j, k}, 6: {i, k}} {
		if got, err := tree.Inclusion(index, 7); err != nil || !slices.Equal(got, want) {
			t.Errorf("path of d%d: %v %v", index, got, err)
		}
	}
	for older, want := range map[int64][]Hash{3: {c, Hash(d[3]), g, l}, 4: {l}, 6: {i, j, k}} {
		if got, err := tree.Consistency(older, 7); err != nil || !slices.Equal(got, want) {
			t.Errorf("PROOF(%d): %v %v", older, got, err)
		}
	}
}

// An independent library accepts every proof, and neither it nor ours accepts one about anything else.
func TestTwoLibrariesAgree(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		size := rapid.Int64Range(1, 200).Draw(t, "size")
		index, older := rapid.Int64Range(0, size-1).Draw(t, "index"), rapid.Int64Range(1, size).Draw(t, "older")
		tree := NewTree(nil)
		var leaves [][32]byte
		for i := range size {
			leaves = append(leaves, LeafHash([]byte{byte(i), byte(i >> 8)}))
			tree.Append(leaves[i])
		}
		root, olderRoot := tree.Root(), Root(leaves[:older])
		path, err := tree.Inclusion(index, size)
		if err != nil {
			t.Fatal(err)
		}
		if err := proof.VerifyInclusion(rfc6962.DefaultHasher, uint64(index), uint64(size), leaves[index][:], raw(path), root[:]); err != nil {
			t.Fatal(err)
		}
		if err := CheckInclusion(path, index, size, leaves[index], root); err != nil {
			t.Fatal(err)
		}
		if CheckInclusion(path, index, size, LeafHash([]byte("another")), root) == nil {
			t.Fatal("another leaf was proven")
		}
		between, err := tree.Consistency(older, size)
		if err != nil {
			t.Fatal(err)
		}
		if err := proof.VerifyConsistency(rfc6962.DefaultHasher, uint64(older), uint64(size), raw(between), olderRoot[:], root[:]); err != nil {
			t.Fatal(err)
		}
		if err := CheckConsistency(between, older, size, olderRoot, root); err != nil {
			t.Fatal(err)
		}
		changed := slices.Clone(leaves[:older])
		changed[older/2] = LeafHash([]byte("rewritten"))
		if CheckConsistency(between, older, size, Root(changed), root) == nil {
			t.Fatal("a rewritten history was proven")
		}
	})
}

func raw(path []Hash) (out [][]byte) {
	for _, h := range path {
		out = append(out, h[:])
	}
	return out
}

func TestWhatNoTreeHolds(t *testing.T) {
	tree := NewTree([][32]byte{LeafHash(nil), LeafHash([]byte("b"))})
	for name, ask := range map[string]func() error{
		"a leaf beyond the size":      func() error { _, err := tree.Inclusion(2, 2); return err },
		"a leaf before the first":     func() error { _, err := tree.Inclusion(-1, 2); return err },
		"a tree that is not yet":      func() error { _, err := tree.Inclusion(0, 3); return err },
		"the root of one":             func() error { _, err := tree.RootAt(3); return err },
		"consistency with a later":    func() error { _, err := tree.Consistency(2, 1); return err },
		"consistency with none":       func() error { _, err := tree.Consistency(1, 3); return err },
		"a leaf that is checked":      func() error { return CheckInclusion(nil, 1, 1, LeafHash(nil), tree.Root()) },
		"two heads of one size":       func() error { return CheckConsistency(nil, 1, 1, LeafHash(nil), tree.Root()) },
		"an empty tree with a leaf":   func() error { return CheckConsistency(nil, 0, 2, LeafHash(nil), tree.Root()) },
		"a longer history of nothing": func() error { return CheckConsistency(nil, 2, 0, tree.Root(), Root(nil)) },
	} {
		if ask() == nil {
			t.Errorf("%s: no error", name)
		}
	}
	if path, err := tree.Consistency(0, 2); err != nil || len(path) != 0 || CheckConsistency(path, 0, 2, Root(nil), tree.Root()) != nil {
		t.Errorf("every tree goes on from the empty one: %v %v", path, err)
	}
}

func TestHashesAreHexAsText(t *testing.T) {
	h := Hash(LeafHash([]byte("x")))
	text, err := json.Marshal(h)
	if err != nil {
		t.Fatal(err)
	}
	var back Hash
	if err := json.Unmarshal(text, &back); err != nil || !cmp.Equal(h, back) || string(text) != `"`+h.String()+`"` {
		t.Errorf("%s %v", text, err)
	}
	for _, bad := range []string{"", "00", h.String() + "00", "zz" + h.String()[2:]} {
		if err := back.UnmarshalText([]byte(bad)); err == nil {
			t.Errorf("%q is a hash", bad)
		}
	}
}
