package cli

import (
	"os"
	"path/filepath"
	"testing"

	"fettle.example/fettle/internal/fault"
)

func TestLoginComesBackAndIsPrivate(t *testing.T) {
	path := filepath.Join(t.TempDir(), "fettle", "login.json")
	want := login{URL: "http://127.0.0.1:7400", Token: "secret", Volume: "cricket-ganglion"}
	if err := writeLogin(path, login{URL: "old"}); err != nil {
		t.Fatal(err)
	}
	if err := writeLogin(path, want); err != nil {
		t.Fatal(err)
	}
	got, err := readLogin(path)
	if err != nil || got != want {
		t.Errorf("read %+v, %v", got, err)
	}
	info, err := os.Stat(path)
	if err != nil || info.Mode().Perm() != 0o600 {
		t.Errorf("mode %v, %v: a token must be readable by its owner alone", info.Mode(), err)
	}
	left, _ := filepath.Glob(filepath.Join(filepath.Dir(path), "*"))
	hidden, _ := filepath.Glob(filepath.Join(filepath.Dir(path), ".*"))
	if len(left)+len(hidden) != 1 {
		t.Errorf("left behind: %v %v", left, hidden)
	}
}

func TestLoginThatOthersCanReadIsRefused(t *testing.T) {
	path := filepath.Join(t.TempDir(), "login.json")
	if err := writeLogin(path, login{Token: "secret"}); err != nil {
		t.Fatal(err)
	}
	for _, mode := range []os.FileMode{0o640, 0o604, 0o660} {
		if err := os.Chmod(path, mode); err != nil {
			t.Fatal(err)
		}
		if l, err := readLogin(path); fault.CodeOf(err) != "login-open" || l.Token != "" {
			t.Errorf("mode %o: read %+v, %v", mode, l, err)
		}
	}
}

func TestNoLoginIsAnEmptyOne(t *testing.T) {
	got, err := readLogin(filepath.Join(t.TempDir(), "none"))
	if err != nil || got != (login{}) {
		t.Errorf("read %+v, %v", got, err)
	}
}
