package proof

import (
	"encoding/json"
	"errors"
	"fmt"
	"strings"
	"unicode/utf8"

	"github.com/gowebpki/jcs"
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

// exact refuses what would not survive.
func exact(b []byte) error {
	if !utf8.Valid(b) || replaced(b) {
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

// replaced says whether the encoder met invalid UTF-8: it writes such a byte as an escaped U+FFFD, and a real U+FFFD as it is.
func replaced(b []byte) bool {
	for i := 0; i+1 < len(b); i++ {
		if b[i] != '\\' {
			continue
		}
		if strings.HasPrefix(string(b[i+1:min(len(b), i+6)]), "ufffd") {
			return true
		}
		i++ // a backslash takes its next byte along, which may be a backslash itself
	}
	return false
}
