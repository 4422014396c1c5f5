package pgserver

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"time"

	"fettle.example/fettle/internal/fault"
)

// claimFolder makes the folder when it is missing, and takes it for this process. The claim ends when the file is closed
// or the process dies.
func claimFolder(dir string) (*os.File, error) {
	if err := makeFolder(dir); err != nil {
		return nil, fmt.Errorf("private PostgreSQL: %w", err)
	}
	f, err := os.OpenFile(filepath.Join(dir, "lock"), os.O_CREATE|os.O_RDWR, 0o644)
	if err != nil {
		return nil, fmt.Errorf("private PostgreSQL: %w", err)
	}
	err = syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB)
	if errors.Is(err, syscall.EWOULDBLOCK) {
		holder := make([]byte, 20)
		n, _ := f.Read(holder)
		f.Close()
		return nil, fault.Newf(fault.Conflict, "postgres-in-use", "the private PostgreSQL in %s is run by process %s", dir, bytes.TrimSpace(holder[:n])).
			WithNext("stop that process first, or choose another folder")
	}
	if err != nil {
		return nil, errors.Join(fmt.Errorf("lock %s: %w", f.Name(), err), f.Close())
	}
	// For people only: the lock is what counts.
	_ = f.Truncate(0)
	_, _ = f.WriteAt([]byte(strconv.Itoa(os.Getpid())+"\n"), 0)
	return f, nil
}

// endForerunner ends the server of a process that died. We hold the claim, so whoever started it is gone: it is
// shutting down, or was never told to.
//
// PostgreSQL notes its process number in postmaster.pid, and refuses to start while a process has the number. After a
// crash that can be a process of another kind. The note then gets our own number, which PostgreSQL takes for an
// inheritance from its parent; its other safeguard, the shared memory of surviving backends, stays in force.
func endForerunner(ctx context.Context, data string) error {
	path := filepath.Join(data, "postmaster.pid")
	note, err := os.ReadFile(path)
	if errors.Is(err, os.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	first, rest, _ := strings.Cut(string(note), "\n")
	pid, err := strconv.Atoi(strings.TrimSpace(first))
	if err != nil || pid <= 1 {
		return nil // PostgreSQL says best what is wrong with it
	}
	switch {
	case serves(pid, data):
	case strings.Contains(commandLine(pid), "postgres"):
		return nil // somebody started it by hand: PostgreSQL refuses to start a second one
	default:
		return os.WriteFile(path, []byte(strconv.Itoa(os.Getpid())+"\n"+rest), 0o600)
	}
	if err := syscall.Kill(pid, syscall.SIGINT); err != nil && !errors.Is(err, syscall.ESRCH) {
		return fmt.Errorf("stop the PostgreSQL that was left behind: %w", err)
	}
	ctx, cancel := context.WithTimeout(ctx, stopTimeout)
	defer cancel()
	for serves(pid, data) {
		select {
		case <-ctx.Done():
			return fault.Newf(fault.Busy, "postgres-left-behind", "process %d, a PostgreSQL that was left behind in %s, does not stop", pid, data).
				WithNext("stop it, and try again")
		case <-time.After(moment):
		}
	}
	return nil
}

// serves tells whether a process is a PostgreSQL that we started on this data.
func serves(pid int, data string) bool {
	return strings.Contains(commandLine(pid), "postgres -D "+data+" -k ")
}
