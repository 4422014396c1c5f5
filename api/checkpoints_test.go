package api_test

import (
	"bytes"
	"fmt"

	"github.com/getkin/kin-openapi/openapi3filter"

	"fettle.example/fettle/api"
	"fettle.example/fettle/ledger/proof"
)

func init() { openapi3filter.RegisterBodyDecoder("application/jsonl", openapi3filter.PlainBodyDecoder) }

// proving is an auditor's visit: everything is checked with the public key and nothing else.
func (h *house) proving() {
	made := read[api.Checkpoint](h, h.must(200, "nobody", "POST", "/checkpoint", nil))
	if newest := read[api.Checkpoint](h, h.must(200, "nobody", "GET", "/checkpoint", nil)); newest.Note != made.Note {
		h.Errorf("the newest checkpoint is\n%s, not\n%s", newest.Note, made.Note)
	}
	key := read[api.CheckpointKey](h, h.must(200, "nobody", "GET", "/checkpoint/key", nil)).Key
	verifier, err := proof.Verifier(key)
	if err != nil {
		h.Fatal(err)
	}
	head, err := proof.Open([]byte(made.Note), made.Origin, verifier)
	if err != nil || head.Size != made.Size || head.Root.String() != made.Root || head.Size == 0 {
		h.Fatalf("%+v, %v", head, err)
	}
	entry := read[api.Entry](h, h.must(200, "nobody", "GET", "/entries/1", nil))
	in := read[api.Proof](h, h.must(200, "nobody", "GET", fmt.Sprint("/proofs/inclusion?position=1&size=", head.Size), nil))
	if err := proof.CheckInclusion(h.path(in), 0, head.Size, proof.LeafHash([]byte(*entry.Content)), head.Root); err != nil {
		h.Error(err)
	}
	grown := read[api.Proof](h, h.must(200, "nobody", "GET", "/proofs/consistency?older=1", nil))
	if err := proof.CheckConsistency(h.path(grown), 1, head.Size, proof.LeafHash([]byte(*entry.Content)), head.Root); err != nil {
		h.Error(err)
	}
	h.refused(404, "position-unknown", "nobody", "GET", "/proofs/inclusion?position=100000", nil)
	h.refused(400, "size-outside", "nobody", "GET", "/proofs/consistency?older=100000", nil)
	story := read[map[string]map[string]any](h, h.must(200, "nobody", "GET", "/provenance", nil))
	if int64(len(story["activity"])) != made.Size {
		h.Errorf("the provenance tells %d of %d entries", len(story["activity"]), made.Size)
	}
	export := h.must(200, "nobody", "GET", "/export", nil).body
	if r, err := proof.VerifyLog(bytes.NewReader(export), proof.Expect{Key: key, Since: []byte(made.Note)}); err != nil || r.Head != head {
		h.Errorf("%+v, %v", r, err)
	}
}

func (h *house) path(p api.Proof) []proof.Hash {
	h.Helper()
	out := make([]proof.Hash, len(p.Path))
	for i, text := range p.Path {
		if err := out[i].UnmarshalText([]byte(text)); err != nil {
			h.Fatal(err)
		}
	}
	return out
}
