package proof

import (
	"bytes"
	"crypto/ed25519"
	"fmt"
	"slices"
	"strings"
	"testing"

	"fettle.example/fettle/internal/fault"
)

const digest = "00ff"

// book is a small ledger that can be tampered with before it is exported.
type book struct {
	*testing.T
	volume string
	seed   []byte
}

func newBook(t *testing.T) book {
	return book{t, "log", bytes.Repeat([]byte{7}, ed25519.SeedSize)}
}

func entryOf(position int, said string) string {
	return fmt.Sprintf(`{"position":"%d","reason":"%s","volume":{"digest":"%s","name":"log"}}`, position, said, digest)
}

// sign makes the checkpoint of the first entries.
func (b book) sign(entries []string) []byte {
	b.Helper()
	tree := NewTree(nil)
	for _, e := range entries {
		tree.Append(LeafHash([]byte(e)))
	}
	signer, err := Signer(Origin(b.volume), b.seed)
	if err != nil {
		b.Fatal(err)
	}
	note, err := Sign(Checkpoint{Origin(b.volume), tree.Size(), tree.Root()}, signer)
	if err != nil {
		b.Fatal(err)
	}
	return note
}

func (b book) export(entries []string, checkpoints ...[]byte) []byte {
	b.Helper()
	var out bytes.Buffer
	err := WriteHeader(&out, LogHeader{LogFormat, PublicKey(Origin(b.volume), b.seed), fmt.Sprint(len(entries)), LogVolume{digest, b.volume}})
	for _, e := range entries {
		if err == nil {
			err = WriteEntry(&out, []byte(e))
		}
	}
	for _, c := range checkpoints {
		if err == nil {
			err = WriteCheckpoint(&out, string(c))
		}
	}
	if err != nil {
		b.Fatal(err)
	}
	return out.Bytes()
}

func five() (entries []string) {
	for n := range 5 {
		entries = append(entries, entryOf(n+1, "said"))
	}
	return entries
}

func TestAGoodExportIsVerified(t *testing.T) {
	b := newBook(t)
	early, late := b.sign(five()[:3]), b.sign(five())
	r, err := VerifyLog(bytes.NewReader(b.export(five(), early, late)), Expect{Since: early, Digest: digest, Key: PublicKey(Origin("log"), b.seed)})
	if err != nil || r.Head.Size != 5 || r.Checkpoints != 2 || r.Since != 3 {
		t.Fatalf("%+v %v", r, err)
	}
	if r, err := VerifyLog(bytes.NewReader(b.export(nil, b.sign(nil))), Expect{}); err != nil || r.Head.Size != 0 {
		t.Errorf("an empty ledger: %+v %v", r, err)
	}
}

// TestEveryBitCounts turns every bit of an export.
func TestEveryBitCounts(t *testing.T) {
	b := newBook(t)
	good := b.export(five()[:2], b.sign(five()[:2]))
	for i := range good {
		for bit := range 8 {
			bad := slices.Clone(good)
			bad[i] ^= 1 << bit
			if _, err := VerifyLog(bytes.NewReader(bad), Expect{}); err == nil {
				t.Errorf("byte %d, %q as %q, was not missed", i, good[i], bad[i])
			}
		}
	}
	for n := range good {
		if _, err := VerifyLog(bytes.NewReader(good[:n]), Expect{}); err == nil {
			t.Errorf("the first %d bytes alone were verified", n)
		}
	}
}

// tamper tells histories that differ from the true one in one thing.
var tamper = map[string]func(e []string) []string{
	"changed":   func(e []string) []string { e[1] = entryOf(2, "something else"); return e },
	"removed":   func(e []string) []string { return slices.Delete(e, 1, 2) },
	"inserted":  func(e []string) []string { return slices.Insert(e, 1, entryOf(2, "forged")) },
	"reordered": func(e []string) []string { e[1], e[2] = e[2], e[1]; return e },
	"shortened": func(e []string) []string { return e[:2] },
}

// renumber gives entries the positions where they stand, as a careful forger would.
func renumber(entries []string) []string {
	for n, e := range entries {
		_, rest, _ := strings.Cut(e, `,"reason"`)
		entries[n] = fmt.Sprintf(`{"position":"%d","reason"%s`, n+1, rest)
	}
	return entries
}

// TestForgeriesAreNamed tries each forgery three times: by a clumsy forger, by one who writes positions and hashes anew, and by one
// who has the key as well and signs anew. The last is betrayed by the checkpoint that the auditor kept.
func TestForgeriesAreNamed(t *testing.T) {
	b := newBook(t)
	truth := b.sign([]string{entryOf(1, "a"), entryOf(2, "b"), entryOf(3, "c"), entryOf(4, "d"), entryOf(5, "e")})
	history := func() []string {
		return []string{entryOf(1, "a"), entryOf(2, "b"), entryOf(3, "c"), entryOf(4, "d"), entryOf(5, "e")}
	}
	for name, forge := range tamper {
		clumsy := forge(history())
		careful := renumber(forge(history()))
		for who, c := range map[string]struct {
			export []byte
			since  []byte
			codes  []string
		}{
			"clumsy":   {b.export(clumsy, truth), nil, []string{"entry-out-of-order", "history-rewritten"}},
			"careful":  {b.export(careful, truth), nil, []string{"history-rewritten"}},
			"key too":  {b.export(careful, b.sign(careful)), truth, []string{"history-rewritten"}},
			"own hash": {b.export(careful), nil, []string{"checkpoint-missing"}},
		} {
			_, err := VerifyLog(bytes.NewReader(c.export), Expect{Since: c.since})
			if !slices.Contains(c.codes, fault.CodeOf(err)) {
				t.Errorf("%s, %s: %v", name, who, err)
			}
		}
		if _, err := VerifyLog(bytes.NewReader(b.export(careful, b.sign(careful))), Expect{}); err != nil {
			t.Errorf("%s: what is signed whole can't be told from the truth without an older checkpoint: %v", name, err)
		}
	}
}

func TestAnotherBaseIsNamed(t *testing.T) {
	b := newBook(t)
	entries := five()
	entries[3] = strings.Replace(entries[3], digest, "00fe", 1)
	for name, c := range map[string]struct {
		export []byte
		expect Expect
		code   string
	}{
		"in one entry":    {b.export(entries, b.sign(entries)), Expect{}, "base-changed"},
		"in the header":   {bytes.Replace(b.export(five(), b.sign(five())), []byte(digest), []byte("00fe"), 1), Expect{}, "base-changed"},
		"in all of it":    {b.export(five(), b.sign(five())), Expect{Digest: "00fe"}, "base-changed"},
		"another's key":   {b.export(five(), b.sign(five())), Expect{Key: PublicKey(Origin("log"), make([]byte, 32))}, "key-changed"},
		"a foreign since": {b.export(five(), b.sign(five())), Expect{Since: []byte(signed)}, "checkpoint-broken"},
	} {
		if _, err := VerifyLog(bytes.NewReader(c.export), c.expect); fault.CodeOf(err) != c.code {
			t.Errorf("%s: %v", name, err)
		}
	}
}
