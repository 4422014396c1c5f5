package worker

import (
	"context"
	"errors"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/riverqueue/river"
	"github.com/riverqueue/river/rivertype"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/triage"
)

type pgxTx = pgx.Tx

// unfinished are the states of a job that will still do its work, or is doing it.
var unfinished = []rivertype.JobState{rivertype.JobStateAvailable, rivertype.JobStatePending, rivertype.JobStateRunning,
	rivertype.JobStateRetryable, rivertype.JobStateScheduled}

// expireEvery bounds how much longer than its lease a claim can live.
const expireEvery = 15 * time.Second

// checkpointEvery bounds how long an entry stands without a signature over it.
const checkpointEvery = 10 * time.Minute

// FollowArgs asks for one volume's findings and tasks to be brought up to its ledger, which has reached a position.
type FollowArgs struct {
	Volume   int32 `json:"volume" river:"unique"`
	Position int64 `json:"position" river:"unique"`
}

// Kind names the job.
func (FollowArgs) Kind() string { return "follow" }

// InsertOpts makes one of them for each group of entries, however many processes were woken by it. It may not be one a volume:
// River counts a running job as well, and that one may have read before the newest entry.
func (FollowArgs) InsertOpts() river.InsertOpts {
	return river.InsertOpts{UniqueOpts: river.UniqueOpts{ByArgs: true}}
}

type follow struct {
	river.WorkerDefaults[FollowArgs]
	worker *Worker
}

func (f *follow) Work(ctx context.Context, job *river.Job[FollowArgs]) error {
	volumes, err := f.worker.cfg.Ledger.Volumes(ctx)
	if err != nil {
		return err
	}
	for _, info := range volumes {
		v, err := f.worker.cfg.Ledger.Volume(ctx, info.Name)
		if err != nil {
			return err
		}
		if v.ID() == job.Args.Volume {
			return f.worker.follow(ctx, v)
		}
	}
	return nil
}

// follow brings findings and then tasks up to the head, until neither has anything left to read.
func (w *Worker) follow(ctx context.Context, v *ledger.Volume) error {
	for {
		position, err := triage.Follow(ctx, v)
		if err != nil {
			return err
		}
		if _, err := w.cfg.Queue.Follow(ctx, v); err != nil {
			return err
		}
		head, err := v.Head(ctx)
		if err != nil || position >= head {
			return err
		}
	}
}

// TickArgs asks for every volume to be looked at.
type TickArgs struct{}

// Kind names the job.
func (TickArgs) Kind() string { return "tick" }

// InsertOpts lets none be made while another waits or runs.
func (TickArgs) InsertOpts() river.InsertOpts {
	return river.InsertOpts{MaxAttempts: 1, UniqueOpts: river.UniqueOpts{ByState: unfinished}}
}

type tick struct {
	river.WorkerDefaults[TickArgs]
	worker *Worker
}

func (t *tick) Work(ctx context.Context, _ *river.Job[TickArgs]) error {
	volumes, err := t.worker.cfg.Ledger.Volumes(ctx)
	if err != nil {
		return err
	}
	var failed error
	for _, info := range volumes {
		v, err := t.worker.cfg.Ledger.Volume(ctx, info.Name)
		if err == nil {
			err = t.worker.follow(ctx, v)
		}
		failed = errors.Join(failed, err)
	}
	return failed
}

// FullArgs asks for a whole volume to be judged again.
type FullArgs struct {
	Volume string `json:"volume" river:"unique"`
}

// Kind names the job.
func (FullArgs) Kind() string { return "full-triage" }

// InsertOpts lets none be made while another waits or runs.
func (FullArgs) InsertOpts() river.InsertOpts {
	return river.InsertOpts{UniqueOpts: river.UniqueOpts{ByArgs: true, ByState: unfinished}}
}

type full struct {
	river.WorkerDefaults[FullArgs]
	worker *Worker
}

func (f *full) Work(ctx context.Context, job *river.Job[FullArgs]) error {
	v, err := f.worker.cfg.Ledger.Volume(ctx, job.Args.Volume)
	if err != nil {
		return err
	}
	if err := triage.Full(ctx, v, nil); err != nil {
		return err
	}
	_, err = f.worker.cfg.Queue.Fill(ctx, v)
	return err
}

// ExpireArgs asks for claims whose lease ran out to be ended.
type ExpireArgs struct{}

// Kind names the job.
func (ExpireArgs) Kind() string { return "expire" }

// InsertOpts lets none be made while another waits or runs.
func (ExpireArgs) InsertOpts() river.InsertOpts {
	return river.InsertOpts{MaxAttempts: 1, UniqueOpts: river.UniqueOpts{ByState: unfinished}}
}

type expire struct {
	river.WorkerDefaults[ExpireArgs]
	worker *Worker
}

func (e *expire) Work(ctx context.Context, _ *river.Job[ExpireArgs]) error {
	n, err := e.worker.cfg.Queue.Expire(ctx)
	if n > 0 {
		e.worker.cfg.Log.Info("claims ran out", "claims", n)
	}
	return err
}

// CheckpointArgs asks for every volume's ledger to be signed as it stands.
type CheckpointArgs struct{}

// Kind names the job.
func (CheckpointArgs) Kind() string { return "checkpoint" }

// InsertOpts lets none be made while another waits or runs.
func (CheckpointArgs) InsertOpts() river.InsertOpts {
	return river.InsertOpts{MaxAttempts: 1, UniqueOpts: river.UniqueOpts{ByState: unfinished}}
}

type checkpoint struct {
	river.WorkerDefaults[CheckpointArgs]
	worker *Worker
}

func (c *checkpoint) Work(ctx context.Context, _ *river.Job[CheckpointArgs]) error {
	volumes, err := c.worker.cfg.Ledger.Volumes(ctx)
	if err != nil {
		return err
	}
	var failed error
	for _, info := range volumes {
		v, err := c.worker.cfg.Ledger.Volume(ctx, info.Name)
		if err == nil {
			_, err = v.Checkpoint(ctx)
		}
		failed = errors.Join(failed, err)
	}
	return failed
}
