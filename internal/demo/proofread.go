package demo

import (
	"context"

	"github.com/google/uuid"

	"fettle.example/fettle/clients/fettle"
	"fettle.example/fettle/internal/fault"
)

// proofread claims and resolves tasks until there were enough of them or none is left.
func (m *member) proofread(ctx context.Context) error {
	for done := 0; done < m.Tasks; {
		task, err := m.claim(ctx)
		if fault.KindOf(err) == fault.NotFound {
			return nil
		}
		if err != nil {
			return err
		}
		err = m.resolve(ctx, task)
		switch fault.KindOf(err) {
		case "":
			done++
			m.tell()
		case fault.Retired, fault.Conflict, fault.Gone:
			m.release(ctx, task, err) // somebody was faster; the queue will have heard of it soon
		default:
			return err
		}
	}
	return nil
}

// tell counts a decision, one teller at a time.
func (t *Team) tell() {
	t.mu.Lock()
	defer t.mu.Unlock()
	t.decided++
	if t.Tell != nil {
		t.Tell(t.decided, t.Tasks*len(Proofreaders))
	}
}

// claim takes the next best task. When the queue seems empty, the followers may only be late.
func (m *member) claim(ctx context.Context) (fettle.Task, error) {
	for second := false; ; second = true {
		task, err := fettle.Read[fettle.Task](m.api.ClaimTask(ctx, m.Volume,
			&fettle.ClaimTaskParams{IdempotencyKey: uuid.Must(uuid.NewV7()).String()}, fettle.ClaimRequest{}))
		if fault.KindOf(err) != fault.NotFound || second {
			return task, err
		}
		if err := m.caughtUp(ctx); err != nil {
			return task, err
		}
	}
}

// release gives back what cannot be resolved any more; a claim that has ended already is as good.
func (m *member) release(ctx context.Context, task fettle.Task, why error) {
	_, _ = fettle.Read[fettle.Task](m.api.ReleaseClaim(ctx, m.Volume, task.Claim.Id, fettle.ReleaseRequest{Reason: why.Error()}))
}

// resolve looks at a place, previews what it would do, and says how the task ends.
func (m *member) resolve(ctx context.Context, task fettle.Task) error {
	o, err := m.judge(ctx, task, m.mind)
	if err != nil {
		return err
	}
	req := fettle.ResolveRequest{Outcome: fettle.Outcome(o.Outcome)}
	if o.Outcome == "corrected" && task.Kind == "false-split" {
		req.Merge = &fettle.MergeRequest{A: seedOf(*task.Proposal.A), B: seedOf(*task.Proposal.B), Expected: task.Segments}
		if _, err := fettle.Read[fettle.MergePreview](m.api.PreviewMerge(ctx, m.Volume, *req.Merge)); err != nil {
			return err
		}
	}
	if o.Outcome == "corrected" && task.Kind == "false-merge" {
		req.Split = &fettle.SplitRequest{Groups: seedsOf(o.Groups), Expected: task.Segments}
		if _, err := fettle.Read[fettle.SplitPreview](m.api.PreviewSplit(ctx, m.Volume, *req.Split)); err != nil {
			return err
		}
	}
	if err := m.think(ctx, o.Took); err != nil {
		return err
	}
	_, err = fettle.Read[fettle.TaskDone](m.api.ResolveClaim(ctx, m.Volume, task.Claim.Id, req))
	return err
}
