package pgserver

import (
	"bytes"
	"context"
	"fmt"
	"os"
	"os/exec"
	"os/user"
	"path/filepath"
	"strconv"
	"syscall"

	"fettle.example/fettle/internal/fault"
)

// runAs is who the server runs as: nil for the present user, and never root, whom PostgreSQL refuses.
func runAs() (*syscall.Credential, error) {
	if os.Geteuid() != 0 {
		return nil, nil
	}
	for _, name := range []string{"postgres", "nobody"} {
		u, err := user.Lookup(name)
		if err != nil {
			continue
		}
		uid, err := strconv.ParseUint(u.Uid, 10, 32)
		if err != nil {
			return nil, err
		}
		gid, err := strconv.ParseUint(u.Gid, 10, 32)
		if err != nil {
			return nil, err
		}
		return &syscall.Credential{Uid: uint32(uid), Gid: uint32(gid)}, nil
	}
	return nil, fault.New(fault.Conflict, "postgres-user", "PostgreSQL refuses to run as root, and there is no user postgres or nobody").
		WithNext("run this as an ordinary user")
}

// settings are written once, for the operator to change. Most are for solid-state disks and many short transactions.
const settings = `
# Set by fettle when it made this folder; change them as you like.
max_connections = 200
shared_buffers = 256MB
max_wal_size = 2GB
checkpoint_timeout = 15min
wal_compression = on
random_page_cost = 1.1
jit = off
timezone = 'UTC'
log_timezone = 'UTC'
`

// initialise makes the data folder when there is none. It is made beside its place and then renamed, so that a crash
// leaves no half of one.
func initialise(ctx context.Context, bin, data string, who *syscall.Credential, scratch bool) error {
	if _, err := os.Stat(filepath.Join(data, "PG_VERSION")); err == nil {
		return nil
	}
	fresh := data + ".new"
	if err := os.RemoveAll(fresh); err != nil {
		return err
	}
	if err := os.Mkdir(fresh, 0o700); err != nil {
		return err
	}
	if who != nil {
		if err := reachable(filepath.Dir(data)); err != nil {
			return err
		}
		if err := os.Chown(fresh, int(who.Uid), int(who.Gid)); err != nil {
			return err
		}
	}
	args := []string{"-D", fresh, "-U", "postgres", "--auth=trust", "--encoding=UTF8", "--locale=C", "--data-checksums"}
	if scratch {
		args = append(args, "--no-sync")
	}
	cmd := exec.CommandContext(ctx, filepath.Join(bin, "initdb"), args...)
	cmd.Dir = fresh
	cmd.SysProcAttr = &syscall.SysProcAttr{Credential: who}
	if out, err := cmd.CombinedOutput(); err != nil {
		return fmt.Errorf("initdb: %w: %s", err, bytes.TrimSpace(out))
	}
	if err := appendTo(filepath.Join(fresh, "postgresql.conf"), settings); err != nil {
		return err
	}
	return os.Rename(fresh, data)
}

func appendTo(path, text string) error {
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_APPEND, 0)
	if err != nil {
		return err
	}
	if _, err := f.WriteString(text); err != nil {
		f.Close()
		return err
	}
	return f.Close()
}

// makeFolder makes a folder that the server's user can walk through, whatever the umask.
func makeFolder(dir string) error {
	if _, err := os.Stat(dir); err == nil {
		return nil
	}
	if err := makeFolder(filepath.Dir(dir)); err != nil {
		return err
	}
	if err := os.Mkdir(dir, 0o755); err != nil {
		return err
	}
	return os.Chmod(dir, 0o755)
}

// reachable refuses a folder that the server's user can't walk to. It opens none: that is for the owner to decide.
func reachable(dir string) error {
	for ; dir != string(filepath.Separator); dir = filepath.Dir(dir) {
		info, err := os.Stat(dir)
		if err != nil {
			return err
		}
		if info.Mode().Perm()&0o001 == 0 {
			return fault.Newf(fault.Conflict, "folder-closed", "the server's user can't reach a folder below %s", dir).
				WithNext("choose a data folder that other users can reach, or run as an ordinary user")
		}
	}
	return nil
}

// socketPathMost is how long a socket's path may be, with a little room: the kernel takes 107 bytes, macOS 103.
const socketPathMost = 95

// socketDir makes the folder of the socket, for the server's user alone: "socket" in our own folder. When that path is
// too long, the folder is in /tmp, and "socket" is a link to it, by which the next start finds what a crash left.
func socketDir(dir string, who *syscall.Credential) (string, error) {
	socket := filepath.Join(dir, "socket")
	if left, err := os.Readlink(socket); err == nil {
		if err := os.RemoveAll(left); err != nil {
			return "", err
		}
	}
	if err := os.RemoveAll(socket); err != nil {
		return "", err
	}
	if len(filepath.Join(socket, ".s.PGSQL.5432")) > socketPathMost {
		short, err := os.MkdirTemp("/tmp", "fettle-pg-")
		if err != nil {
			return "", err
		}
		if err := os.Symlink(short, socket); err != nil {
			return "", err
		}
		socket = short
	} else if err := os.Mkdir(socket, 0o700); err != nil {
		return "", err
	}
	if who == nil {
		return socket, nil
	}
	return socket, os.Chown(socket, int(who.Uid), int(who.Gid))
}
