package proof

import (
	"bufio"
	"bytes"
	"encoding/json"
	"errors"
	"io"
	"strconv"

	"golang.org/x/mod/sumdb/note"

	"fettle.example/fettle/internal/fault"
)

// LogFormat names the layout of an exported ledger: JSON Lines, each line canonical (RFC 8785). First a [LogHeader], then
// {"entry":…,"leaf":…} for each entry in order, then {"checkpoint":…} for each signed checkpoint, of which the last covers every
// entry.
const LogFormat = "fettle ledger 1"

// LogHeader begins an exported ledger.
type LogHeader struct {
	Format string    `json:"format"`
	Key    string    `json:"key"`
	Size   string    `json:"size"` // entries, as decimal text
	Volume LogVolume `json:"volume"`
}

// LogVolume is what entries are about.
type LogVolume struct {
	Digest string `json:"digest"` // of the base
	Name   string `json:"name"`
}

type checkpointLine struct {
	Checkpoint string `json:"checkpoint"`
}

// WriteHeader writes the first line of an export.
func WriteHeader(w io.Writer, h LogHeader) error { return writeLine(w, h) }

// WriteEntry writes the line of an entry, of which content are the canonical bytes.
func WriteEntry(w io.Writer, content []byte) error {
	_, err := w.Write(entryLine(content, LeafHash(content)))
	return err
}

// WriteCheckpoint writes the line of a signed checkpoint.
func WriteCheckpoint(w io.Writer, signed string) error { return writeLine(w, checkpointLine{signed}) }

func writeLine(w io.Writer, v any) error {
	b, err := Canonical(v)
	if err != nil {
		return err
	}
	_, err = w.Write(append(b, '\n'))
	return err
}

func entryLine(content []byte, leaf Hash) []byte {
	b := make([]byte, 0, len(content)+90)
	b = append(append(b, `{"entry":`...), content...)
	b = append(append(b, `,"leaf":"`...), leaf.String()...)
	return append(b, "\"}\n"...)
}

// Expect is what an auditor knows from elsewhere. Zero fields are not checked.
type Expect struct {
	Key    string // public key; without it, the export's own is believed
	Digest string // of the base
	Since  []byte // a signed checkpoint that was kept from before
}

// LogReport is what an export that stood every check holds.
type LogReport struct {
	Header      LogHeader  `json:"header"`
	Head        Checkpoint `json:"head"`
	Checkpoints int        `json:"checkpoints"`
	Since       int64      `json:"since"` // entries that the kept checkpoint covered
}

// VerifyLog reads an exported ledger and checks every byte of it: form, order, hashes, the base that each entry names, the
// signature and root of each checkpoint, and that the ledger goes on from the checkpoint that was kept. It stops at the first thing
// that is wrong and names it.
func VerifyLog(r io.Reader, expect Expect) (*LogReport, error) {
	v := &verification{in: bufio.NewReader(r), tree: NewTree(nil), expect: expect}
	for _, step := range []func() error{v.header, v.entries, v.checkpoints, v.since} {
		if err := step(); err != nil {
			return nil, err
		}
	}
	return &v.report, nil
}

type verification struct {
	in     *bufio.Reader
	expect Expect
	size   int64
	key    note.Verifier
	tree   *Tree
	report LogReport
}

// line reads a line with its end, or nothing at the end of the file.
func (v *verification) line() ([]byte, error) {
	b, err := v.in.ReadBytes('\n')
	if errors.Is(err, io.EOF) {
		if len(b) > 0 {
			return nil, broken("export-malformed", "the export ends within a line: it was cut off")
		}
		return nil, nil
	}
	return b, err
}

func broken(code, format string, args ...any) *fault.Error {
	return fault.Newf(fault.Conflict, code, format, args...).
		WithNext("don't trust this copy: compare it with an older export, and ask the operator for a backup")
}

// exactly says whether a line is the canonical form of what was read from it.
func exactly(line []byte, v any) bool {
	b, err := Canonical(v)
	return err == nil && bytes.Equal(line, append(b, '\n'))
}

func (v *verification) header() error {
	line, err := v.line()
	if err != nil {
		return err
	}
	h := &v.report.Header
	if json.Unmarshal(line, h) != nil || h.Format != LogFormat || !exactly(line, h) {
		return broken("export-malformed", "the first line is not the header of an exported ledger")
	}
	v.size, err = strconv.ParseInt(h.Size, 10, 64)
	if err != nil || v.size < 0 || strconv.FormatInt(v.size, 10) != h.Size {
		return broken("export-malformed", "%q is no number of entries", h.Size)
	}
	if v.expect.Digest != "" && v.expect.Digest != h.Volume.Digest {
		return broken("base-changed", "the export is of base %s, not of %s", h.Volume.Digest, v.expect.Digest)
	}
	if v.expect.Key != "" && v.expect.Key != h.Key {
		return broken("key-changed", "the export names the key %s, not %s", h.Key, v.expect.Key)
	}
	v.key, err = Verifier(h.Key)
	if err != nil || v.key.Name() != Origin(h.Volume.Name) || !exactKey(h.Key) {
		return broken("key-malformed", "%q is no key of %s", h.Key, h.Volume.Name)
	}
	return nil
}

func (v *verification) entries() error {
	for n := int64(1); n <= v.size; n++ {
		line, err := v.line()
		if err != nil {
			return err
		}
		var l struct {
			Entry json.RawMessage `json:"entry"`
			Leaf  Hash            `json:"leaf"`
		}
		if json.Unmarshal(line, &l) != nil || !bytes.Equal(line, entryLine(l.Entry, l.Leaf)) {
			return broken("entry-malformed", "line %d is not an entry: the one at position %d was changed or removed", n+1, n)
		}
		if LeafHash(l.Entry) != l.Leaf {
			return broken("entry-changed", "the entry at position %d was changed: its bytes don't have the hash beside them", n)
		}
		var e struct {
			Position string    `json:"position"`
			Volume   LogVolume `json:"volume"`
		}
		if json.Unmarshal(l.Entry, &e) != nil || e.Position != strconv.FormatInt(n, 10) {
			return broken("entry-out-of-order", "where the entry at position %d belongs stands that of position %q: "+
				"entries were removed, inserted or reordered", n, e.Position)
		}
		if e.Volume != v.report.Header.Volume {
			return broken("base-changed", "the entry at position %d is about base %s of %s, and the export about %s of %s", n,
				e.Volume.Digest, e.Volume.Name, v.report.Header.Volume.Digest, v.report.Header.Volume.Name)
		}
		v.tree.Append(l.Leaf)
	}
	return nil
}

func (v *verification) checkpoints() error {
	for {
		line, err := v.line()
		if err != nil {
			return err
		}
		if line == nil {
			break
		}
		var l checkpointLine
		if json.Unmarshal(line, &l) != nil || !exactly(line, l) || l.Checkpoint == "" {
			return broken("export-malformed", "line %d is no checkpoint: an entry was inserted, or a checkpoint changed",
				v.size+2+int64(v.report.Checkpoints))
		}
		c, err := Open([]byte(l.Checkpoint), v.key.Name(), v.key)
		if err != nil {
			return broken("checkpoint-broken", "checkpoint %d of the export is not signed as it should be", v.report.Checkpoints+1).Wrap(err)
		}
		if err := v.agrees(c, v.report.Head.Size); err != nil {
			return err
		}
		if c.Size < v.report.Head.Size {
			return broken("checkpoint-broken", "the checkpoints are not in their order")
		}
		v.report.Head = c
		v.report.Checkpoints++
	}
	if v.report.Checkpoints == 0 || v.report.Head.Size != v.size {
		return broken("checkpoint-missing", "no checkpoint covers all %d entries", v.size)
	}
	return nil
}

// agrees says whether a checkpoint is of the entries as they are here; up to proven they are known to be right.
func (v *verification) agrees(c Checkpoint, proven int64) error {
	if c.Size > v.size {
		return broken("history-rewritten", "a checkpoint covers %d entries, and here are %d: entries were removed", c.Size, v.size)
	}
	root, err := v.tree.RootAt(c.Size)
	if err != nil {
		return err
	}
	if Hash(root) != c.Root {
		return broken("history-rewritten", "an entry at positions %d to %d was changed, removed, inserted or moved after the checkpoint of %d entries was signed",
			min(proven+1, c.Size), c.Size, c.Size)
	}
	return nil
}

func (v *verification) since() error {
	if v.expect.Since == nil {
		return nil
	}
	c, err := Open(v.expect.Since, v.key.Name(), v.key)
	if err != nil {
		return broken("checkpoint-broken", "the checkpoint that was kept is not signed by the key of this ledger").Wrap(err)
	}
	v.report.Since = c.Size
	return v.agrees(c, 0)
}
