package proof

import (
	"crypto/ed25519"
	"testing"
)

// The key of seed 00 01 … 1f, as golang.org/x/mod/sumdb/note reads it, and signs with it what it signed before.
func TestKeyIsWrittenAsNotesWriteIt(t *testing.T) {
	var seed [ed25519.SeedSize]byte
	for i := range seed {
		seed[i] = byte(i)
	}
	want, verifier := key(t)
	if got := PublicKey(origin, seed[:]); got != origin+"+ac878f8c+AQOhB7/zzhC+HXDdGOdLwJln5NYwm6UNXx3chmQSVTG4" {
		t.Errorf("public key %s", got)
	}
	got, err := Signer(origin, seed[:])
	if err != nil || got.KeyHash() != want.KeyHash() {
		t.Fatal(got, err)
	}
	text, err := Sign(Checkpoint{Origin: origin, Size: 0, Root: Root(nil)}, got)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Open(text, origin, verifier); err != nil {
		t.Error(err)
	}
	if _, err := Verifier("fettle.example/log+ac878f8d+AQOhB7"); err == nil {
		t.Error("half a key was read")
	}
}
