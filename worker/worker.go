// Package worker registers the background jobs with River: each is a few lines that call the rooms which know how.
//
// It promises that whatever an entry changes is judged again and its tasks follow within about a second, in any one of the
// processes that work, and that a lost wake-up costs a tick and never a finding. The work itself, and its correctness when two
// processes do it at once, is that of triage and tasks.
package worker

import (
	"context"
	"fmt"
	"log/slog"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"
	"github.com/riverqueue/river"
	"github.com/riverqueue/river/riverdriver/riverpgxv5"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/migrations"
	"fettle.example/fettle/tasks"
)

// Config says what to work on.
type Config struct {
	Pool   *pgxpool.Pool
	Ledger *ledger.Ledger
	Queue  *tasks.Queue
	Log    *slog.Logger
	Tick   time.Duration // between looks at every volume; 0: DefaultTick
}

// DefaultTick bounds how late a lost wake-up can make the findings.
const DefaultTick = 10 * time.Second

// jobsAtOnce is how many jobs a process runs: they wait for the database more than they compute.
const jobsAtOnce = 4

// Worker runs jobs until it is stopped.
type Worker struct {
	cfg    Config
	client *river.Client[pgxTx]
	stop   context.CancelFunc
	alarm  chan struct{} // closed when the alarm clock has stopped
}

// New registers the jobs. The database has been migrated.
func New(cfg Config) (*Worker, error) {
	if cfg.Tick == 0 {
		cfg.Tick = DefaultTick
	}
	if cfg.Log == nil {
		cfg.Log = slog.New(slog.DiscardHandler)
	}
	w := &Worker{cfg: cfg, alarm: make(chan struct{})}
	workers := river.NewWorkers()
	river.AddWorker(workers, &follow{worker: w})
	river.AddWorker(workers, &tick{worker: w})
	river.AddWorker(workers, &full{worker: w})
	river.AddWorker(workers, &expire{worker: w})
	river.AddWorker(workers, &checkpoint{worker: w})
	client, err := river.NewClient(riverpgxv5.New(cfg.Pool), &river.Config{
		Schema:        migrations.JobSchema,
		Queues:        map[string]river.QueueConfig{river.QueueDefault: {MaxWorkers: jobsAtOnce}},
		Workers:       workers,
		Logger:        slog.New(quiet{cfg.Log.Handler()}),
		FetchCooldown: 50 * time.Millisecond,
		JobTimeout:    -1, // a full triage of a large volume takes as long as it takes
		PeriodicJobs: []*river.PeriodicJob{
			river.NewPeriodicJob(river.PeriodicInterval(cfg.Tick), func() (river.JobArgs, *river.InsertOpts) { return TickArgs{}, nil },
				&river.PeriodicJobOpts{RunOnStart: true}),
			river.NewPeriodicJob(river.PeriodicInterval(expireEvery), func() (river.JobArgs, *river.InsertOpts) { return ExpireArgs{}, nil },
				&river.PeriodicJobOpts{RunOnStart: true}),
			river.NewPeriodicJob(river.PeriodicInterval(checkpointEvery), func() (river.JobArgs, *river.InsertOpts) { return CheckpointArgs{}, nil },
				&river.PeriodicJobOpts{RunOnStart: true}),
		},
	})
	if err != nil {
		return nil, fmt.Errorf("worker: %w", err)
	}
	w.client = client
	return w, nil
}

// Start begins to work and returns. The work ends with Stop and not with ctx, so that a signal lets running jobs finish.
func (w *Worker) Start(ctx context.Context) error {
	ctx, w.stop = context.WithCancel(context.WithoutCancel(ctx))
	if err := w.client.Start(ctx); err != nil {
		w.stop()
		return fmt.Errorf("worker: %w", err)
	}
	go func() {
		defer close(w.alarm)
		w.wake(ctx)
	}()
	return nil
}

// Stop waits for running jobs as long as ctx allows, then breaks them off. What they had not stored they will do again.
func (w *Worker) Stop(ctx context.Context) error {
	err := w.client.Stop(ctx)
	if err != nil {
		err = w.client.StopAndCancel(context.WithoutCancel(ctx))
	}
	w.stop()
	<-w.alarm
	return err
}

// FullTriage asks for a triage of a whole volume.
func (w *Worker) FullTriage(ctx context.Context, volume string) error {
	_, err := w.client.Insert(ctx, FullArgs{Volume: volume}, nil)
	return err
}

// waitBetween bounds how often a lost connection is tried again.
const waitBetween = time.Second

// wake listens for entries and asks for the volumes they are in to be followed. A NOTIFY lost while it reconnects is made up for
// by the next tick.
func (w *Worker) wake(ctx context.Context) {
	for ctx.Err() == nil {
		if err := w.listen(ctx); err != nil && ctx.Err() == nil {
			w.cfg.Log.Warn("listening for entries was interrupted", "error", err)
			select {
			case <-ctx.Done():
			case <-time.After(waitBetween):
			}
		}
	}
}

func (w *Worker) listen(ctx context.Context) error {
	conn, err := w.cfg.Pool.Acquire(ctx)
	if err != nil {
		return err
	}
	// The connection keeps listening, so it is not given back.
	raw := conn.Hijack()
	defer raw.Close(context.WithoutCancel(ctx)) //nolint:errcheck // it ends either way
	if _, err := raw.Exec(ctx, `listen `+ledger.Channel); err != nil {
		return err
	}
	for {
		n, err := raw.WaitForNotification(ctx)
		if err != nil {
			return err
		}
		var volume int32
		var position int64
		if _, err := fmt.Sscan(n.Payload, &volume, &position); err != nil {
			w.cfg.Log.Warn("a notification says nothing", "payload", n.Payload)
			continue
		}
		if _, err := w.client.Insert(ctx, FollowArgs{Volume: volume, Position: position}, nil); err != nil {
			return err
		}
	}
}

// quiet passes warnings and errors alone: River's ordinary messages are not the operator's business.
type quiet struct{ slog.Handler }

func (q quiet) Enabled(ctx context.Context, level slog.Level) bool {
	return level >= slog.LevelWarn && q.Handler.Enabled(ctx, level)
}
