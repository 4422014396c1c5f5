// Package pgserver runs a private PostgreSQL: from the machine's own programs, in a data folder of its own, reachable
// through a unix socket alone, never as root, gone with the process that started it, and there again with its data the
// next time.
//
// What is in the database is left to others. Windows is not served: PostgreSQL there has other ways.
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
	bin, data, socket string
	cmd               *exec.Cmd
	claim             *os.File // the folder is ours while it is open
	exited            chan struct{}
	died              error // why, once exited is closed
	once              sync.Once
	stopped           error
}

// startTimeout bounds the wait for the first answer, recovery after a crash included.
const startTimeout = 2 * time.Minute

// stopTimeout bounds a fast shutdown, which has to write a checkpoint.
const stopTimeout = 30 * time.Second

// moment is the time between two looks at something that tells nobody when it changes.
const moment = 20 * time.Millisecond

// Start finds the programs, makes the data folder when there is none, and starts the server. It returns when the
// database answers.
func Start(ctx context.Context, cfg Config) (*Server, error) {
	dir, err := filepath.Abs(cfg.Dir)
	if err != nil {
		return nil, err
	}
	claim, err := claimFolder(dir)
	if err != nil {
		return nil, err
	}
	s := &Server{data: filepath.Join(dir, "data"), claim: claim, exited: make(chan struct{})}
	if err := s.start(ctx, dir, cfg); err != nil {
		return nil, errors.Join(err, claim.Close())
	}
	return s, nil
}

func (s *Server) start(ctx context.Context, dir string, cfg Config) (err error) {
	if s.bin, err = programs(ctx, dir, s.data, cfg.FetchPostgres); err != nil {
		return err
	}
	who, err := runAs()
	if err != nil {
		return err
	}
	if err := initialise(ctx, s.bin, s.data, who, cfg.Scratch); err != nil {
		return err
	}
	if err := endForerunner(ctx, s.data); err != nil {
		return err
	}
	if s.socket, err = socketDir(dir, who); err != nil {
		return err
	}
	if err := s.run(ctx, who, cfg); err != nil {
		os.RemoveAll(s.socket)
		return err
	}
	return nil
}

// URL is the address of the database "postgres".
func (s *Server) URL() string { return s.URLOf("postgres") }

// URLOf is the address of another database of this server.
func (s *Server) URLOf(database string) string {
	q := url.Values{"host": {s.socket}, "user": {"postgres"}}
	return "postgres:///" + url.PathEscape(database) + "?" + q.Encode()
}

// Done is closed when the server has exited, wanted or not.
func (s *Server) Done() <-chan struct{} { return s.exited }

// Process is the number of the server's process.
func (s *Server) Process() int { return s.cmd.Process.Pid }

// arguments hold whatever the operator writes into postgresql.conf.
func (s *Server) arguments(scratch bool) []string {
	args := []string{"-D", s.data, "-k", s.socket, "-c", "listen_addresses=", "-c", "unix_socket_permissions=0700"}
	if scratch {
		args = append(args, "-c", "fsync=off", "-c", "synchronous_commit=off", "-c", "full_page_writes=off", "-c", "autovacuum=off")
	}
	return args
}

// run starts the server and waits for its first answer.
func (s *Server) run(ctx context.Context, who *syscall.Credential, cfg Config) error {
	s.cmd = exec.Command(filepath.Join(s.bin, "postgres"), s.arguments(cfg.Scratch)...)
	s.cmd.Dir = s.data
	said := &lastLines{also: cfg.Log}
	s.cmd.Stdout, s.cmd.Stderr = said, said
	s.cmd.SysProcAttr = attributes(who)
	ended, err := startAndWait(s.cmd)
	if err != nil {
		return fmt.Errorf("start PostgreSQL: %w", err)
	}
	go func() { s.died = <-ended; close(s.exited) }()
	ctx, cancel := context.WithTimeout(ctx, startTimeout)
	defer cancel()
	for {
		select {
		case <-s.exited:
			return fault.Newf(fault.Conflict, "postgres-stopped", "the private PostgreSQL in %s stopped at once: %s", s.data, said).
				WithNext("see what it said, or choose another folder").Wrap(s.died)
		case <-ctx.Done():
			return errors.Join(fmt.Errorf("the private PostgreSQL in %s does not answer: %w", s.data, ctx.Err()), s.Stop())
		case <-time.After(moment):
		}
		if conn, err := pgx.Connect(ctx, s.URL()); err == nil {
			return conn.Close(ctx)
		}
	}
}

// Stop shuts the server down: open transactions are rolled back, committed ones are on disk. It may be called again.
func (s *Server) Stop() error {
	s.once.Do(func() {
		s.cmd.Process.Signal(syscall.SIGINT) //nolint:errcheck // it may have exited
		select {
		case <-s.exited:
		case <-time.After(stopTimeout):
			s.stopped = errors.Join(errors.New("PostgreSQL did not stop in time and was killed"), s.cmd.Process.Kill())
			<-s.exited
		}
		s.stopped = errors.Join(s.stopped, os.RemoveAll(s.socket), s.claim.Close())
	})
	return s.stopped
}
