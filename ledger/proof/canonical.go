// Package proof makes bytes that can be hashed, and hashes that can be checked: canonical JSON (RFC 8785) and the Merkle
// tree of RFC 6962. It reads nothing and writes nothing.
//
// What an entry's bytes say is the ledger's matter; that they are always the same bytes is this package's.
package proof

import (
	"encoding/json"
	"errors"
	"fmt"
	"strings"
	"unicode/utf8"

	"github.com/gowebpki/jcs"
	"golang.org/x/mod/sumdb/tlog"
)

// mostExact is 2^53: whole numbers above it are not all doubles, and canonical JSON would round them.
const mostExact = 1 << 53

// Canonical writes a value as RFC 8785 bytes. Numbers that a double can't hold exactly are refused, not rounded, so
// 64-bit ids have to be text; so is text that is not valid UTF-8.
func Canonical(v any) ([]byte, error) {
	b, err := json.Marshal(v)
	if err != nil {
		return nil, fmt.Errorf("canonical JSON: %w", err)
	}
	if err := exact(b); err != nil {
		return nil, fmt.Errorf("canonical JSON: %w", err)
	}
	out, err := jcs.Transform(b)
	if err != nil {
		return nil, fmt.Errorf("canonical JSON: %w", err)
	}
	return out, nil
}

// exact refuses what would not survive: Go's encoder has already replaced invalid UTF-8 by U+FFFD.
func exact(b []byte) error {
	if !utf8.Valid(b) || strings.Contains(string(b), `\ufffd`) {
		return errors.New("text is not valid UTF-8")
	}
	d := json.NewDecoder(strings.NewReader(string(b)))
	d.UseNumber()
	for {
		t, err := d.Token()
		if err != nil {
			return nil // the end: Marshal wrote valid JSON
		}
		n, ok := t.(json.Number)
		if !ok {
			continue
		}
		if i, err := n.Int64(); err == nil && (i > mostExact || i < -mostExact) || err != nil && !strings.ContainsAny(n.String(), ".eE") {
			return fmt.Errorf("number %s is not exact as a double: send it as text", n)
		}
	}
}

// LeafHash is the hash of a leaf: SHA-256 over 0x00 and the bytes (RFC 6962, section 2.1).
func LeafHash(b []byte) [32]byte { return tlog.RecordHash(b) }
