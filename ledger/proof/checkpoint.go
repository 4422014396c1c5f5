package proof

import (
	"encoding/base64"
	"errors"
	"fmt"
	"strconv"
	"strings"

	"golang.org/x/mod/sumdb/note"

	"fettle.example/fettle/internal/fault"
)

// Checkpoint is the head of a tree at a size, under the name of its log. Its text is C2SP's tlog-checkpoint without extension
// lines: origin, size and base64 root, each on a line.
type Checkpoint struct {
	Origin string // names the log for all time: "fettle.example/cricket-ganglion"
	Size   int64
	Root   Hash
}

// mostSigned bounds a signed checkpoint: some hundred signatures.
const mostSigned = 64 << 10

// Text is what is signed.
func (c Checkpoint) Text() string {
	return fmt.Sprintf("%s\n%d\n%s\n", c.Origin, c.Size, base64.StdEncoding.EncodeToString(c.Root[:]))
}

// ParseCheckpoint reads a checkpoint's text; extension lines after the root are allowed, and ignored.
func ParseCheckpoint(text string) (Checkpoint, error) {
	malformed := func(what string) (Checkpoint, error) {
		return Checkpoint{}, fault.Newf(fault.Invalid, "checkpoint-malformed", "this is no checkpoint: %s", what).
			WithNext("give it as it was published: origin, size, root, an empty line, signatures")
	}
	lines := strings.Split(text, "\n")
	if len(lines) < 4 || lines[len(lines)-1] != "" {
		return malformed("it has fewer than three whole lines")
	}
	for _, l := range lines[:len(lines)-1] {
		if l == "" {
			return malformed("one of its lines is empty")
		}
	}
	size, err := strconv.ParseInt(lines[1], 10, 64)
	if err != nil || size < 0 || strconv.FormatInt(size, 10) != lines[1] {
		return malformed(fmt.Sprintf("%.40q is not a size", lines[1]))
	}
	root, err := base64.StdEncoding.Strict().DecodeString(lines[2])
	if err != nil || len(root) != len(Hash{}) {
		return malformed(fmt.Sprintf("%.80q is not a root hash", lines[2]))
	}
	return Checkpoint{Origin: lines[0], Size: size, Root: Hash(root)}, nil
}

// Sign signs a checkpoint as a C2SP signed note. The signer must make sure that it never signs two trees of which neither goes on
// from the other.
func Sign(c Checkpoint, signers ...note.Signer) ([]byte, error) {
	if _, err := ParseCheckpoint(c.Text()); err != nil {
		return nil, err
	}
	if len(signers) == 0 {
		return nil, errors.New("proof: a checkpoint needs a signer")
	}
	b, err := note.Sign(&note.Note{Text: c.Text()}, signers...)
	if err != nil {
		return nil, fmt.Errorf("sign checkpoint: %w", err)
	}
	return b, nil
}

// Open reads a signed checkpoint that at least one of the known keys signed. Unknown signatures are ignored; a bad one under a
// known key refuses it whole.
func Open(signed []byte, origin string, known ...note.Verifier) (Checkpoint, error) {
	if len(signed) > mostSigned {
		return Checkpoint{}, fault.Newf(fault.Invalid, "checkpoint-malformed", "a checkpoint of %d bytes is not read", len(signed))
	}
	n, err := note.Open(signed, note.VerifierList(known...))
	if err != nil {
		return Checkpoint{}, fault.New(fault.Invalid, "checkpoint-unsigned", "no known key has signed this checkpoint").
			WithNext("give the log's public key, and the checkpoint as it was published").Wrap(err)
	}
	for _, sig := range append(n.Sigs, n.UnverifiedSigs...) {
		if _, err := base64.StdEncoding.Strict().DecodeString(sig.Base64); err != nil {
			return Checkpoint{}, fault.New(fault.Invalid, "checkpoint-malformed", "a signature's last bits are not zero").Wrap(err)
		}
	}
	c, err := ParseCheckpoint(n.Text)
	if err != nil {
		return Checkpoint{}, err
	}
	if c.Origin != origin {
		return Checkpoint{}, fault.Newf(fault.Invalid, "checkpoint-foreign", "this checkpoint is of %q, not of %q", c.Origin, origin)
	}
	return c, nil
}
