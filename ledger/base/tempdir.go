package base

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"syscall"
)

// tempPrefix begins the names of import folders.
const tempPrefix = "fettle-import-"

// lockFile is held locked by the import that owns a folder, for as long as its process lives.
const lockFile = "lock"

// tempDir is a folder for one import.
type tempDir struct {
	path string
	lock *os.File
}

// newTempDir makes a folder under dir, and removes those of imports whose process has died.
func newTempDir(dir string) (*tempDir, error) {
	if dir == "" {
		dir = os.TempDir()
	}
	old, err := filepath.Glob(filepath.Join(dir, tempPrefix+"*"))
	if err != nil {
		return nil, err
	}
	for _, path := range old {
		if t, err := lockTempDir(path); err == nil {
			t.remove()
		}
	}
	for {
		path, err := os.MkdirTemp(dir, tempPrefix)
		if err != nil {
			return nil, err
		}
		t, err := lockTempDir(path)
		if errors.Is(err, fs.ErrNotExist) || errors.Is(err, syscall.EWOULDBLOCK) {
			continue // another import took the new folder for a dead one's
		}
		return t, err
	}
}

// lockTempDir takes a folder over; it fails while another process holds it.
func lockTempDir(path string) (*tempDir, error) {
	f, err := os.OpenFile(filepath.Join(path, lockFile), os.O_CREATE|os.O_RDWR, 0o600)
	if err != nil {
		return nil, err
	}
	if err := syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB); err != nil {
		f.Close() //nolint:errcheck // nothing was written
		return nil, err
	}
	if _, err := os.Stat(f.Name()); err != nil { // removed between the two steps
		f.Close() //nolint:errcheck // nothing was written
		return nil, err
	}
	return &tempDir{path: path, lock: f}, nil
}

// remove takes the folder away. What cannot be removed now, the next import tries again.
func (t *tempDir) remove() {
	os.RemoveAll(t.path) //nolint:errcheck // see above
	t.lock.Close()       //nolint:errcheck // nothing was written
}
