// Package pgserver runs a private PostgreSQL: from the machine's own programs, in a data folder of its own, reachable
// through a unix socket alone, never as root, gone with the process that started it, and there again with its data the
// next time.
//
// What is in the database is left to others.
package pgserver

import (
	"context"
	"errors"
	"fmt"
	"io"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"sync"
	"syscall"
	"time"

	"github.com/jackc/pgx/v5"

	"fettle.example/fettle/internal/fault"
)

// Config says where and how.
type Config struct {
	Dir           string    // the folder that holds everything; made when missing
	FetchPostgres bool      // fetch a pinned build when the machine has no programs
	Log           io.Writer // what the server says; nil: discarded
	Scratch       bool      // for tests: no fsync, nothing survives a power cut
}

// Server is a running PostgreSQL.
type Server struct {
	url    string
	cmd    *exec.Cmd
	exited chan struct{}
	socket string
	once   sync.Once
	err    error
}

// startTimeout bounds the wait for the first answer, recovery after a crash included.
const startTimeout = 2 * time.Minute

// stopTimeout bounds a fast shutdown, which has to write a checkpoint.
const stopTimeout = 30 * time.Second

// Start finds the programs, makes the data folder when there is none, and starts the server. It returns when the
// database answers.
func Start(ctx context.Context, cfg Config) (*Server, error) {
	dir, err := filepath.Abs(cfg.Dir)
	if err != nil {
		return nil, err
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, fmt.Errorf("private PostgreSQL: %w", err)
	}
	bin, err := programs(ctx, dir, cfg.FetchPostgres)
	if err != nil {
		return nil, err
	}
	who, err := runAs()
	if err != nil {
		return nil, err
	}
	data := filepath.Join(dir, "data")
	if err := initialise(ctx, bin, data, who); err != nil {
		return nil, err
	}
	socket, err := socketDir(dir, who)
	if err != nil {
		return nil, err
	}
	s := &Server{socket: socket, exited: make(chan struct{}), url: address(socket, "postgres")}
	if err := s.run(ctx, bin, data, who, cfg); err != nil {
		os.RemoveAll(socket)
		return nil, err
	}
	return s, nil
}

// URL is the address of the database "postgres".
func (s *Server) URL() string { return s.url }

// URLOf is the address of another database of this server.
func (s *Server) URLOf(database string) string { return address(s.socket, database) }

func address(socket, database string) string {
	q := url.Values{"host": {socket}, "user": {"postgres"}}
	return "postgres:///" + url.PathEscape(database) + "?" + q.Encode()
}

// run starts the server and waits for its first answer.
func (s *Server) run(ctx context.Context, bin, data string, who *syscall.Credential, cfg Config) error {
	args := []string{"-D", data, "-k", s.socket, "-c", "listen_addresses=", "-c", "unix_socket_permissions=0700",
		"-c", "max_connections=200", "-c", "shared_buffers=256MB", "-c", "max_wal_size=2GB", "-c", "wal_compression=on"}
	if cfg.Scratch {
		args = append(args, "-c", "fsync=off", "-c", "synchronous_commit=off", "-c", "full_page_writes=off", "-c", "autovacuum=off")
	}
	s.cmd = exec.Command(filepath.Join(bin, "postgres"), args...)
	s.cmd.Dir = data
	tail := &lastLines{also: cfg.Log}
	s.cmd.Stdout, s.cmd.Stderr = tail, tail
	s.cmd.SysProcAttr = attributes(who)
	if err := startOnKeptThread(s.cmd); err != nil {
		return fmt.Errorf("start PostgreSQL: %w", err)
	}
	go func() { s.err = s.cmd.Wait(); close(s.exited) }()
	ctx, cancel := context.WithTimeout(ctx, startTimeout)
	defer cancel()
	for {
		select {
		case <-s.exited:
			return fault.Newf(fault.Conflict, "postgres-stopped", "the private PostgreSQL in %s stopped at once: %s", data, tail).
				WithNext("if another fettled uses this folder, stop it first").Wrap(s.err)
		case <-ctx.Done():
			s.Stop()
			return fmt.Errorf("the private PostgreSQL in %s does not answer: %w", data, ctx.Err())
		case <-time.After(20 * time.Millisecond):
		}
		if conn, err := pgx.Connect(ctx, s.url); err == nil {
			return conn.Close(ctx)
		}
	}
}

// Stop shuts the server down: open transactions are rolled back, committed ones are on disk. It may be called again.
func (s *Server) Stop() error {
	var err error
	s.once.Do(func() {
		s.cmd.Process.Signal(syscall.SIGINT) //nolint:errcheck // it may have exited
		select {
		case <-s.exited:
		case <-time.After(stopTimeout):
			err = errors.Join(errors.New("PostgreSQL did not stop in time and was killed"), s.cmd.Process.Kill())
			<-s.exited
		}
		os.RemoveAll(s.socket)
	})
	return err
}
