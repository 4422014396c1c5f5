package proof

import (
	"encoding/json"
	"errors"
	"fmt"
	"strconv"
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

// exact refuses what would not survive. The bytes are the encoder's, so they are valid JSON.
func exact(b []byte) error {
	if !utf8.Valid(b) || replaced(b) {
		return errors.New("text is not valid UTF-8")
	}
	for i := 0; i < len(b); i++ {
		switch c := b[i]; {
		case c == '"':
			for i++; b[i] != '"'; i++ {
				if b[i] == '\\' {
					i++
				}
			}
		case c == '-' || c >= '0' && c <= '9':
			from := i
			for i+1 < len(b) && strings.IndexByte("0123456789+-.eE", b[i+1]) >= 0 {
				i++
			}
			if err := exactNumber(string(b[from : i+1])); err != nil {
				return err
			}
		}
	}
	return nil
}

func exactNumber(text string) error {
	if strings.ContainsAny(text, ".eE") {
		return nil
	}
	if n, err := strconv.ParseInt(text, 10, 64); err != nil || n > mostExact || n < -mostExact {
		return fmt.Errorf("number %s is not exact as a double: send it as text", text)
	}
	return nil
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
