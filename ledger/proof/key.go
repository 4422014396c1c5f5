package proof

import (
	"crypto/ed25519"
	"crypto/sha256"
	"encoding/base64"
	"encoding/binary"
	"fmt"
	"strings"

	"golang.org/x/mod/sumdb/note"

	"fettle.example/fettle/internal/fault"
)

// ed25519Key is the algorithm byte before an Ed25519 key (C2SP signed-note).
const ed25519Key = 0x01

// Origin names the log of a volume, and its key.
func Origin(volume string) string { return "fettle.example/" + volume }

// Signer is the key with a name and an Ed25519 seed of 32 bytes.
func Signer(name string, seed []byte) (note.Signer, error) {
	public := ed25519.NewKeyFromSeed(seed).Public().(ed25519.PublicKey)
	s, err := note.NewSigner(fmt.Sprintf("PRIVATE+KEY+%s+%08x+%s", name, keyHash(name, public), keyBytes(seed)))
	if err != nil {
		return nil, fmt.Errorf("signing key of %s: %w", name, err)
	}
	return s, nil
}

// PublicKey writes the public part of that key as C2SP's verifier keys are written: name+hash+base64.
func PublicKey(name string, seed []byte) string {
	public := ed25519.NewKeyFromSeed(seed).Public().(ed25519.PublicKey)
	return fmt.Sprintf("%s+%08x+%s", name, keyHash(name, public), keyBytes(public))
}

func keyBytes(key []byte) string {
	return base64.StdEncoding.EncodeToString(append([]byte{ed25519Key}, key...))
}

// keyHash is the first four bytes of SHA-256 over name, newline, algorithm and key (C2SP signed-note).
func keyHash(name string, public ed25519.PublicKey) uint32 {
	sum := sha256.Sum256(append([]byte(name+"\n\x01"), public...))
	return binary.BigEndian.Uint32(sum[:])
}

// exactKey says whether the hash in a key is written in the one way that [PublicKey] has: note reads capitals as well.
func exactKey(key string) bool {
	_, rest, _ := strings.Cut(key, "+")
	hash, _, _ := strings.Cut(rest, "+")
	return hash == strings.ToLower(hash)
}

// Verifier reads a public key.
func Verifier(key string) (note.Verifier, error) {
	v, err := note.NewVerifier(key)
	if err != nil {
		return nil, fault.Newf(fault.Invalid, "key-malformed", "%.200q is not a public key", key).
			WithNext("give it as fettle ledger key shows it: name+hash+base64").Wrap(err)
	}
	return v, nil
}
