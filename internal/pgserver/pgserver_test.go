package pgserver

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
)

// parentOf makes the test program a process that starts a server in a folder and waits to be killed.
const parentOf = "PGSERVER_TEST_PARENT_OF"

func TestMain(m *testing.M) {
	if dir := os.Getenv(parentOf); dir != "" {
		s, err := Start(context.Background(), Config{Dir: dir})
		if err != nil {
			fmt.Println(err)
			os.Exit(1)
		}
		fmt.Println(s.URL())
		select {}
	}
	os.Exit(m.Run())
}

func TestDataSurvivesRestart(t *testing.T) {
	t.Parallel()
	dir := folder(t)
	s := start(t, dir)
	do(t, s.URL(), `create table told (what text); insert into told values ('as before')`)
	if err := s.Stop(); err != nil {
		t.Fatal(err)
	}
	if got := ask(t, start(t, dir).URL(), `select what from told`); got != "as before" {
		t.Errorf("after the restart the table says %q", got)
	}
}

func TestServerIsPrivateAndSafe(t *testing.T) {
	t.Parallel()
	dir := folder(t)
	s := start(t, dir)
	for setting, want := range map[string]string{
		"listen_addresses": "", "server_encoding": "UTF8", "lc_collate": "C", "data_checksums": "on", "fsync": "on",
		"synchronous_commit": "on", "full_page_writes": "on", "TimeZone": "UTC",
	} {
		query := `select current_setting('` + setting + `')`
		if setting == "lc_collate" {
			query = `select datcollate from pg_database where datname = current_database()`
		}
		if got := ask(t, s.URL(), query); got != want {
			t.Errorf("%s is %q, want %q", setting, got, want)
		}
	}
	for _, folder := range []string{s.data, s.socket} {
		info, err := os.Stat(folder)
		if err != nil {
			t.Fatal(err)
		}
		if info.Mode().Perm() != 0o700 {
			t.Errorf("%s is open to others: %v", folder, info.Mode())
		}
		if owner := info.Sys().(*syscall.Stat_t).Uid; owner == 0 {
			t.Errorf("%s belongs to root", folder)
		}
	}
}

func TestTwoServersOnOneFolderAreRefused(t *testing.T) {
	t.Parallel()
	dir := folder(t)
	s := start(t, dir)
	_, err := Start(t.Context(), Config{Dir: dir})
	if fault.CodeOf(err) != "postgres-in-use" || !strings.Contains(err.Error(), strconv.Itoa(os.Getpid())) {
		t.Errorf("the second start says: %v; it should name process %d", err, os.Getpid())
	}
	if got := ask(t, s.URL(), `select 'still here'`); got != "still here" {
		t.Errorf("the first server says %q", got)
	}
}

// A killed fettled takes its server with it, and the next one finds the data, without waiting for anything by hand.
func TestServerDiesWithItsParent(t *testing.T) {
	t.Parallel()
	dir := folder(t)
	parent := exec.Command(os.Args[0])
	parent.Env = append(os.Environ(), parentOf+"="+dir)
	out, err := parent.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := parent.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = parent.Process.Kill() })
	url, _ := bufio.NewReader(out).ReadString('\n')
	conn := connect(t, strings.TrimSpace(url))
	if _, err := conn.Exec(t.Context(), `create table told (what text); insert into told values ('as before')`); err != nil {
		t.Fatal(err)
	}
	if err := parent.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	_ = parent.Wait()  // its hold on the folder ends with it
	s := start(t, dir) // at once, while the other server still shuts down
	if got := ask(t, s.URL(), `select what from told`); got != "as before" {
		t.Errorf("after the crash the table says %q", got)
	}
	ctx, cancel := context.WithTimeout(t.Context(), time.Minute)
	defer cancel()
	if _, err := conn.WaitForNotification(ctx); err == nil || ctx.Err() != nil {
		t.Errorf("the old server still answers: %v", err)
	}
}

// The kernel alone ends the server: nobody starts another one.
func TestServerDiesWithItsParentUnasked(t *testing.T) {
	t.Parallel()
	parent := exec.Command(os.Args[0])
	parent.Env = append(os.Environ(), parentOf+"="+folder(t))
	out, err := parent.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := parent.Start(); err != nil {
		t.Fatal(err)
	}
	url, _ := bufio.NewReader(out).ReadString('\n')
	conn := connect(t, strings.TrimSpace(url))
	if err := parent.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	parent.Wait() //nolint:errcheck // it was killed
	ctx, cancel := context.WithTimeout(t.Context(), time.Minute)
	defer cancel()
	if _, err := conn.WaitForNotification(ctx); err == nil || ctx.Err() != nil {
		t.Errorf("the server outlived its parent: %v", err)
	}
}

// A killed server leaves its process number behind, and by now another process may have it.
func TestStaleNoteOfAnotherProcess(t *testing.T) {
	t.Parallel()
	dir := folder(t)
	s := start(t, dir)
	do(t, s.URL(), `create table told (what text); insert into told values ('as before')`)
	note := filepath.Join(s.data, "postmaster.pid")
	text, err := os.ReadFile(note)
	if err != nil {
		t.Fatal(err)
	}
	if err := s.cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	<-s.Done()
	s.Stop() //nolint:errcheck // it was killed

	other := exec.Command("cat")
	if who, err := runAs(); err == nil && who != nil {
		other.SysProcAttr = &syscall.SysProcAttr{Credential: who}
	}
	in, err := other.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := other.Start(); err != nil {
		t.Fatal(err)
	}
	defer other.Wait() //nolint:errcheck // its end is all that counts
	defer in.Close()
	_, rest, _ := strings.Cut(string(text), "\n")
	if err := os.WriteFile(note, fmt.Appendf(nil, "%d\n%s", other.Process.Pid, rest), 0o600); err != nil {
		t.Fatal(err)
	}
	if got := ask(t, start(t, dir).URL(), `select what from told`); got != "as before" {
		t.Errorf("after the crash the table says %q", got)
	}
	if err := other.Process.Signal(syscall.Signal(0)); err != nil {
		t.Errorf("the other process was harmed: %v", err)
	}
}

// A socket's path may have 107 bytes; a folder's may have more.
func TestLongFolder(t *testing.T) {
	t.Parallel()
	dir := filepath.Join(folder(t), strings.Repeat("long", 30), "folder")
	s := start(t, dir)
	short := s.socket
	if got := ask(t, s.URL(), `select 'here'`); got != "here" {
		t.Errorf("the server says %q", got)
	}
	if err := s.Stop(); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(short); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("%s is left behind: %v", short, err)
	}
	if got := ask(t, start(t, dir).URL(), `select 'again'`); got != "again" {
		t.Errorf("the server says %q after its restart", got)
	}
}

func TestFolderThatTheServersUserCannotReach(t *testing.T) {
	t.Parallel()
	closed := folder(t)
	if err := os.Chmod(closed, 0o700); err != nil {
		t.Fatal(err)
	}
	s, err := Start(t.Context(), Config{Dir: filepath.Join(closed, "inside")})
	if who, _ := runAs(); who == nil { // an ordinary user reaches its own folders
		if err != nil {
			t.Fatal(err)
		}
		s.Stop() //nolint:errcheck // it was enough that it started
		return
	}
	if fault.CodeOf(err) != "folder-closed" || !strings.Contains(err.Error(), closed) {
		t.Errorf("Start = %v, want a refusal that names %s", err, closed)
	}
}

// What the server said goes into the message when it can't start.
func TestServerThatStopsAtOnceSaysWhy(t *testing.T) {
	t.Parallel()
	dir := folder(t)
	if err := start(t, dir).Stop(); err != nil {
		t.Fatal(err)
	}
	if err := appendTo(filepath.Join(dir, "data", "postgresql.conf"), "no_such_setting = 1\n"); err != nil {
		t.Fatal(err)
	}
	_, err := Start(t.Context(), Config{Dir: dir, Log: io.Discard})
	if fault.CodeOf(err) != "postgres-stopped" || !strings.Contains(err.Error(), "no_such_setting") {
		t.Errorf("Start = %v, want what PostgreSQL said", err)
	}
}

// folder makes a folder that the server's user can reach; those of testing are closed to it.
func folder(t *testing.T) string {
	t.Helper()
	dir, err := os.MkdirTemp("", "pgserver-")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.RemoveAll(dir) })
	if err := os.Chmod(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	return dir
}

func start(t *testing.T, dir string) *Server {
	t.Helper()
	s, err := Start(t.Context(), Config{Dir: dir})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.Stop() }) //nolint:errcheck // those that matter are checked
	return s
}

func connect(t *testing.T, url string) *pgx.Conn {
	t.Helper()
	conn, err := pgx.Connect(t.Context(), url)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { conn.Close(context.WithoutCancel(t.Context())) })
	return conn
}

func do(t *testing.T, url, sql string) {
	t.Helper()
	if _, err := connect(t, url).Exec(t.Context(), sql); err != nil {
		t.Fatal(err)
	}
}

func ask(t *testing.T, url, sql string) (answer string) {
	t.Helper()
	if err := connect(t, url).QueryRow(t.Context(), sql).Scan(&answer); err != nil {
		t.Fatal(err)
	}
	return answer
}
