package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net"
	"net/http"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/api"
	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
	"fettle.example/fettle/internal/pgserver"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/migrations"
	"fettle.example/fettle/tasks"
	"fettle.example/fettle/worker"
)

// Daemon is an open house: a migrated database and the rooms over it. Close it.
type Daemon struct {
	Config Config
	Log    *slog.Logger
	Pool   *pgxpool.Pool
	Ledger *ledger.Ledger
	People *tasks.People
	Queue  *tasks.Queue

	address string           // of the database
	server  *pgserver.Server // nil unless we started it
}

// Open connects to the database, starting the private one if that is wanted, and brings it up to date.
func Open(ctx context.Context, c Config, log *slog.Logger) (*Daemon, error) {
	d := &Daemon{Config: c, Log: log}
	var err error
	if d.address, err = d.database(ctx); err != nil {
		return nil, err
	}
	pool, err := pg.Open(ctx, d.address)
	if err != nil {
		return nil, errors.Join(err, d.Close())
	}
	d.Pool = pool
	if err := migrations.Up(ctx, pool); err != nil {
		return nil, errors.Join(err, d.Close())
	}
	d.Ledger = ledger.New(pool)
	d.People = tasks.NewPeople(pool)
	d.Queue = tasks.NewQueue(d.Ledger, pool)
	return d, nil
}

// database is the address to use: the one that was given, else that of the private PostgreSQL, which is started unless
// another process has it running.
func (d *Daemon) database(ctx context.Context) (string, error) {
	if d.Config.Database != "" {
		return d.Config.Database, nil
	}
	server, err := pgserver.Start(ctx, pgserver.Config{Dir: d.Config.Data, FetchPostgres: d.Config.FetchPostgres, Log: io.Discard})
	if fault.CodeOf(err) == "postgres-in-use" {
		if address, ok := running(ctx, d.Config.Data); ok {
			return address, nil
		}
	}
	if err != nil {
		return "", err
	}
	d.server = server
	d.Log.Debug("private PostgreSQL started", "folder", d.Config.Data, "address", server.URL())
	return server.URL(), nil
}

// Close lets go of the database, and stops the private one.
func (d *Daemon) Close() error {
	if d.Pool != nil {
		d.Pool.Close()
	}
	if d.server != nil {
		return d.server.Stop()
	}
	return nil
}

// grace is how long an orderly end may take before what still runs is cut off.
const grace = 10 * time.Second

// Run serves the API, works in the background, or both, until ctx ends; then it lets requests and jobs finish.
// started is told the address once requests are answered.
func (d *Daemon) Run(ctx context.Context, serve, work bool, started func(address string)) error {
	stop := func() error { return nil }
	if work {
		var err error
		if stop, err = d.startWorker(ctx); err != nil {
			return err
		}
	}
	var err error
	if serve {
		err = d.serve(ctx, started)
	} else {
		started("")
		<-ctx.Done()
	}
	return errors.Join(err, stop())
}

func (d *Daemon) startWorker(ctx context.Context) (stop func() error, err error) {
	w, err := worker.New(worker.Config{Pool: d.Pool, Ledger: d.Ledger, Queue: d.Queue, Log: d.Log})
	if err != nil {
		return nil, err
	}
	if err := w.Start(ctx); err != nil {
		return nil, err
	}
	return func() error {
		end, cancel := context.WithTimeout(context.WithoutCancel(ctx), grace)
		defer cancel()
		return w.Stop(end)
	}, nil
}

func (d *Daemon) serve(ctx context.Context, started func(address string)) error {
	listener, err := net.Listen("tcp", d.Config.Listen)
	if err != nil {
		return fmt.Errorf("listen on %s: %w", d.Config.Listen, err)
	}
	handler := api.New(api.Config{Pool: d.Pool, Ledger: d.Ledger, People: d.People, Queue: d.Queue, Log: d.Log}).Handler()
	server := &http.Server{Handler: handler, ReadHeaderTimeout: 10 * time.Second, ErrorLog: slog.NewLogLogger(d.Log.Handler(), slog.LevelWarn)}
	failed := make(chan error, 1)
	go func() { failed <- server.Serve(listener) }()
	started(listener.Addr().String())
	select {
	case err := <-failed:
		return err
	case <-ctx.Done():
	}
	d.Log.Info("stopping; once more to stop at once")
	end, cancel := context.WithTimeout(context.WithoutCancel(ctx), grace)
	defer cancel()
	return server.Shutdown(end)
}
