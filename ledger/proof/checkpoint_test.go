package proof

import (
	"crypto/ed25519"
	"encoding/base64"
	"encoding/hex"
	"errors"
	"fmt"
	"strings"
	"testing"

	"golang.org/x/mod/sumdb/note"

	"fettle.example/fettle/internal/fault"
)

const origin = "fettle.example/log"

// key is the Ed25519 key with the seed 00 01 … 1f, as golang.org/x/mod/sumdb/note writes keys.
func key(t *testing.T) (note.Signer, note.Verifier) {
	t.Helper()
	var seed [ed25519.SeedSize]byte
	for i := range seed {
		seed[i] = byte(i)
	}
	const id, algorithm = "ac878f8c", "\x01"
	signer, err := note.NewSigner(fmt.Sprintf("PRIVATE+KEY+%s+%s+%s", origin, id, base64.StdEncoding.EncodeToString(append([]byte(algorithm), seed[:]...))))
	if err != nil {
		t.Fatal(err)
	}
	verifier, err := note.NewVerifier(origin + "+" + id + "+AQOhB7/zzhC+HXDdGOdLwJln5NYwm6UNXx3chmQSVTG4")
	if err != nil {
		t.Fatal(err)
	}
	return signer, verifier
}

// The head of size 7 of RFC 6962's test tree, signed by golang.org/x/mod/sumdb/note v0.43.0.
const signed = origin + "\n7\n3bib5AOAnjJXUNPSY814kpwpQreUKjS3fhIslZSnTIw=\n\n" +
	"— " + origin + " rIePjNtm4Fu+V6qqrKeHqwXPijqVd/Wae9RClasPnjkN1nbE8AWC1OcH2cDUumi/RMuHdw/LvceJG/nPsuSW3fYEZwM=\n"

func TestSignedCheckpoint(t *testing.T) {
	signer, verifier := key(t)
	root, err := hex.DecodeString("ddb89be403809e325750d3d263cd78929c2942b7942a34b77e122c9594a74c8c")
	if err != nil {
		t.Fatal(err)
	}
	want := Checkpoint{Origin: origin, Size: 7, Root: Hash(root)}
	got, err := Sign(want, signer)
	if err != nil || string(got) != signed {
		t.Fatalf("%v\n%s", err, got)
	}
	if c, err := Open(got, origin, verifier); err != nil || c != want {
		t.Errorf("%+v %v", c, err)
	}
}

// Printed with the package golang.org/x/mod/sumdb/note: a note that its author signed.
func TestKnownNoteVerifies(t *testing.T) {
	verifier, err := note.NewVerifier("PeterNeumann+c74f20a3+ARpc2QcUPDhMQegwxbzhKqiBfsVkmqq/LDE4izWy10TW")
	if err != nil {
		t.Fatal(err)
	}
	const text = "If you think cryptography is the answer to your problem,\nthen you don't know what your problem is.\n" +
		"\n— PeterNeumann x08go/ZJkuBS9UG/SffcvIAQxVBtiFupLLr8pAcElZInNIuGUgYN1FFYC2pZSNXgKvqfqdngotpRZb6KE6RyyBwJnAM=\n"
	_, err = Open([]byte(text), origin, verifier)
	if !errors.Is(err, fault.New(fault.Invalid, "checkpoint-malformed", "")) {
		t.Errorf("well signed, and yet no checkpoint: %v", err)
	}
	_, err = Open([]byte(strings.Replace(text, "answer", "Answer", 1)), origin, verifier)
	if !errors.Is(err, fault.New(fault.Invalid, "checkpoint-unsigned", "")) {
		t.Errorf("one letter changed: %v", err)
	}
}

func TestWhatIsNotOpened(t *testing.T) {
	_, verifier := key(t)
	for name, c := range map[string]struct{ text, origin, code string }{
		"another log's":    {signed, "fettle.example/other", "checkpoint-foreign"},
		"a changed size":   {strings.Replace(signed, "\n7\n", "\n8\n", 1), origin, "checkpoint-unsigned"},
		"a changed root":   {strings.Replace(signed, "3bib", "3bic", 1), origin, "checkpoint-unsigned"},
		"no signature":     {signed[:strings.Index(signed, "—")], origin, "checkpoint-unsigned"},
		"a foreign key":    {strings.Replace(signed, "— "+origin, "— fettle.example/else", 1), origin, "checkpoint-unsigned"},
		"an endless thing": {strings.Repeat("x", mostSigned+1), origin, "checkpoint-malformed"},
	} {
		if _, err := Open([]byte(c.text), c.origin, verifier); !errors.Is(err, fault.New(fault.Invalid, c.code, "")) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// The sample of C2SP tlog-checkpoint.
func TestCheckpointText(t *testing.T) {
	const text = "example.com/behind-the-sofa\n20852163\nCsUYapGGPo4dkMgIAUqom/Xajj7h2fB2MPA3j2jxq2I=\n"
	c, err := ParseCheckpoint(text)
	if err != nil || c.Origin != "example.com/behind-the-sofa" || c.Size != 20852163 || c.Text() != text {
		t.Fatalf("%+v %v", c, err)
	}
	if _, err := ParseCheckpoint(text + "an extension\n"); err != nil {
		t.Errorf("extension lines are allowed: %v", err)
	}
	for _, bad := range []string{"", "a\n1\n", strings.Replace(text, "20852163", "020852163", 1), strings.Replace(text, "20852163", "-1", 1),
		strings.Replace(text, "20852163", "+1", 1), strings.Replace(text, "CsUY", "CsU", 1), strings.TrimSuffix(text, "\n"), "\n" + text, text + "\n"} {
		if c, err := ParseCheckpoint(bad); err == nil {
			t.Errorf("%q is %+v", bad, c)
		}
	}
}
