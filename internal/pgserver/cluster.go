package pgserver

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"os"
	"os/exec"
	"os/user"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
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

// initialise makes the data folder when there is none. It is made beside its place and then renamed, so that a crash
// leaves no half of one.
func initialise(ctx context.Context, bin, data string, who *syscall.Credential) error {
	if version, err := os.ReadFile(filepath.Join(data, "PG_VERSION")); err == nil {
		return sameMajor(ctx, bin, data, strings.TrimSpace(string(version)))
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
	cmd := exec.CommandContext(ctx, filepath.Join(bin, "initdb"), "-D", fresh, "-U", "postgres", "--auth=trust",
		"--encoding=UTF8", "--locale=C.UTF-8", "--data-checksums", "--no-sync")
	cmd.Dir = fresh
	cmd.SysProcAttr = attributes(who)
	if out, err := cmd.CombinedOutput(); err != nil {
		return fmt.Errorf("initdb: %w: %s", err, bytes.TrimSpace(out))
	}
	return os.Rename(fresh, data)
}

// reachable lets the server's user walk to its folder; it does not let it list the folders on the way.
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

// sameMajor refuses programs that cannot read the data.
func sameMajor(ctx context.Context, bin, data, major string) error {
	out, err := exec.CommandContext(ctx, filepath.Join(bin, "postgres"), "--version").Output()
	if err != nil {
		return fmt.Errorf("postgres --version: %w", err)
	}
	fields := strings.Fields(string(out)) // postgres (PostgreSQL) 15.18 ...
	if len(fields) < 3 || strings.SplitN(fields[2], ".", 2)[0] != major {
		return fault.Newf(fault.Conflict, "postgres-version", "%s was made by PostgreSQL %s, and the programs are %s", data, major, bytes.TrimSpace(out)).
			WithNext("install PostgreSQL " + major + ", or move the data with pg_dump")
	}
	return nil
}

// socketPathMost is how long a socket's path may be, with a little room: the kernel takes 107 bytes, macOS 103.
const socketPathMost = 95

// socketDir makes the folder of the socket: in the server's own folder, or in /tmp when that path is too long.
func socketDir(dir string, who *syscall.Credential) (string, error) {
	socket := filepath.Join(dir, "socket")
	if err := os.MkdirAll(socket, 0o700); err != nil {
		return "", err
	}
	if len(filepath.Join(socket, ".s.PGSQL.5432")) > socketPathMost {
		var err error
		if socket, err = os.MkdirTemp("/tmp", "fettle-pg-"); err != nil {
			return "", err
		}
	}
	if who != nil {
		if err := os.Chown(socket, int(who.Uid), int(who.Gid)); err != nil {
			return "", err
		}
	}
	return socket, nil
}

// programs finds the folder with initdb and postgres: on the path, then in the usual places, newest first, then fetched.
func programs(ctx context.Context, dir string, fetch bool) (string, error) {
	if path, err := exec.LookPath("initdb"); err == nil {
		if real, err := filepath.EvalSymlinks(path); err == nil {
			return filepath.Dir(real), nil
		}
	}
	var found []string
	for _, pattern := range []string{"/usr/lib/postgresql/*/bin", "/usr/pgsql-*/bin", "/opt/homebrew/opt/postgresql@*/bin", "/usr/local/opt/postgresql@*/bin",
		"/Applications/Postgres.app/Contents/Versions/*/bin"} {
		matches, _ := filepath.Glob(pattern)
		for _, m := range matches {
			if _, err := os.Stat(filepath.Join(m, "initdb")); err == nil {
				found = append(found, m)
			}
		}
	}
	if len(found) > 0 {
		return newest(found), nil
	}
	if fetch {
		return fetched(ctx, filepath.Join(dir, "programs"))
	}
	return "", fault.New(fault.NotFound, "postgres-missing", "this machine has no PostgreSQL programs").
		WithNext("on Debian: apt-get install postgresql; or start with --fetch-postgres; or give --database an address")
}

// newest picks the folder with the highest version number in its path.
func newest(dirs []string) string {
	version := func(p string) (n int) {
		for _, part := range strings.FieldsFunc(p, func(r rune) bool { return r < '0' || r > '9' }) {
			if v, err := strconv.Atoi(part); err == nil {
				n = max(n, v)
			}
		}
		return n
	}
	best := dirs[0]
	for _, d := range dirs[1:] {
		if version(d) > version(best) {
			best = d
		}
	}
	return best
}

// lastLines keeps the end of what the server said, for the message when it stops at once.
type lastLines struct {
	mu   sync.Mutex
	kept []byte
	also io.Writer
}

const keptBytes = 600

func (l *lastLines) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	l.kept = append(l.kept, p...)
	if n := len(l.kept); n > keptBytes {
		l.kept = l.kept[n-keptBytes:]
	}
	if l.also != nil {
		return l.also.Write(p)
	}
	return len(p), nil
}

func (l *lastLines) String() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return strings.Join(strings.Fields(string(l.kept)), " ")
}
