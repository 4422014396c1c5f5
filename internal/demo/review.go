package demo

import (
	"context"

	"fettle.example/fettle/clients/fettle"
	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/synth"
)

// review accepts or returns what others resolved, until nothing is left that this person can decide.
func (m *member) review(ctx context.Context) error {
	undecided := map[int64]bool{}
	for {
		waiting, err := fettle.Read[fettle.Tasks](m.api.ListReviews(ctx, m.Volume, &fettle.ListReviewsParams{}))
		if err != nil {
			return err
		}
		decided := 0
		for _, task := range waiting.Items {
			if undecided[task.Number] {
				continue
			}
			err := m.decide(ctx, task)
			switch fault.KindOf(err) {
			case "":
				decided++
			case fault.Conflict, fault.Retired, fault.NotFound, fault.Gone:
				undecided[task.Number] = true // another reviewer was faster, or later entries stand on this one
			default:
				return err
			}
		}
		if decided == 0 {
			return nil
		}
	}
}

// decide holds a resolution against what is true.
func (m *member) decide(ctx context.Context, task fettle.Task) error {
	right, err := m.right(ctx, task)
	if err != nil {
		return err
	}
	req := fettle.ReviewRequest{Verdict: "accept"}
	if !right {
		note := "not what the images show"
		req = fettle.ReviewRequest{Verdict: "return", Note: &note}
	}
	_, err = fettle.Read[fettle.TaskDone](m.api.ReviewTask(ctx, m.Volume, task.Number, req))
	return err
}

// right says whether a careful look agrees with an outcome. A correction is judged by what it joined or parted, and
// what was left alone by what was proposed: the segments may not be what they were.
func (m *member) right(ctx context.Context, task fettle.Task) (bool, error) {
	r, p := task.Resolution, task.Proposal
	switch {
	case r.Position != nil:
		return m.rightEntry(ctx, *r.Position)
	case p != nil && p.Groups != nil:
		return m.second.Split(groupsOf(*p.Groups), nil).Outcome == string(r.Outcome), nil
	}
	v, err := m.judge(ctx, task, m.second)
	return v.Outcome == string(r.Outcome), err
}

func (m *member) rightEntry(ctx context.Context, position int64) (bool, error) {
	e, err := fettle.Read[fettle.Entry](m.api.GetEntry(ctx, m.Volume, position))
	if err != nil {
		return false, err
	}
	if e.Kind == "merge" {
		pair := e.Joined.Links[0]
		return m.second.Merge(number(pair[0]), number(pair[1])).Outcome == synth.Corrected, nil
	}
	return m.second.Split(groupsOf(*e.Seeds), nil).Outcome == synth.Corrected, nil
}
