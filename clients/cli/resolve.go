package cli

import (
	"context"
	"fmt"

	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
)

// resolution is how a person ends a task.
type resolution struct {
	correction
	asProposed bool
	merge      []string
	groups     []string
}

func (a *app) resolveCommand() *cobra.Command {
	var r resolution
	cmd := &cobra.Command{
		Use:   "resolve corrected|sound|unclear [NUMBER]",
		Short: "End a task that you hold: corrected, sound (no error there) or unclear",
		Long: `End a task that you hold.

corrected  there was an error. The correction is posted together with the outcome, or neither is:
           --as-proposed takes the task's own proposal, --merge A,B a link, --group … --group … a split.
sound      there is no error; the place does not come back.
unclear    the images do not tell.`,
		Example: `  fettle resolve corrected --as-proposed
  fettle resolve corrected --group 13,14 --group 24,25 --note "crossing"
  fettle resolve sound --note "a real branch"`,
		Args:      cobra.RangeArgs(1, 2),
		ValidArgs: []string{"corrected", "sound", "unclear"},
		RunE: func(cmd *cobra.Command, args []string) error {
			outcome := fettle.Outcome(args[0])
			if err := r.check(outcome); err != nil {
				return err
			}
			t, err := a.heldTask(cmd.Context(), args[1:])
			if err != nil {
				return err
			}
			req := fettle.ResolveRequest{Outcome: outcome, Note: optional(r.reason)}
			if outcome == "corrected" {
				if err := a.correct(cmd.Context(), t, &r, &req); err != nil || r.preview {
					return err
				}
			}
			done, err := fettle.Read[fettle.TaskDone](a.client.ResolveClaim(cmd.Context(), a.volume, t.Claim.Id, req, repeatable(t.Claim.Id)))
			if err != nil {
				return err
			}
			return a.printDone(done)
		},
	}
	f := cmd.Flags()
	f.BoolVar(&r.asProposed, "as-proposed", false, "correct as the task proposes")
	f.StringSliceVar(&r.merge, "merge", nil, "correct by a link between `A,B`: supervoxel ids")
	addGroups(cmd, &r.groups)
	f.StringSliceVar(&r.expect, "expect", nil, "the `SEGMENTS` you saw (default: the task's)")
	f.StringVar(&r.reason, "note", "", "a word for the reviewer; it stands in the ledger for ever")
	f.BoolVar(&r.preview, "preview", false, "say what the correction would do, and post nothing")
	f.BoolVarP(&r.yes, "yes", "y", false, "post without asking")
	return cmd
}

// check holds the options against the outcome, before anything is asked.
func (r *resolution) check(outcome fettle.Outcome) error {
	ways := 0
	for _, given := range []bool{r.asProposed, len(r.merge) > 0, len(r.groups) > 0} {
		if given {
			ways++
		}
	}
	switch {
	case outcome != "corrected" && outcome != "sound" && outcome != "unclear":
		return usage("there is no outcome %q", outcome).WithNext("use corrected, sound or unclear")
	case outcome == "corrected" && ways != 1:
		return usage("a correction needs one way to correct, not %d", ways).
			WithNext("add --as-proposed, or --merge A,B, or --group … --group …")
	case outcome != "corrected" && ways > 0:
		return usage("%s changes nothing, and a correction was given too", outcome).WithNext("leave the correction away, or resolve as corrected")
	case len(r.merge) > 0 && len(r.merge) != 2:
		return usage("a merge joins two supervoxels, not %d", len(r.merge)).WithNext("give --merge A,B")
	}
	return nil
}

// correct fills in the correction, shows what it would do, and asks. It expects the segments that the claim showed.
func (a *app) correct(ctx context.Context, t fettle.Task, r *resolution, req *fettle.ResolveRequest) error {
	if r.asProposed {
		if err := r.take(t.Proposal); err != nil {
			return err
		}
	}
	if len(r.expect) == 0 {
		r.expect = t.Segments
	}
	if len(r.merge) == 2 {
		m, err := a.mergeRequest(ctx, r.merge[0], r.merge[1], &r.correction)
		if err != nil {
			return err
		}
		p, err := a.previewMerge(ctx, a.volume, *m, &r.correction)
		if err != nil || r.preview {
			return err
		}
		m.A, m.B = fettle.Seed{Supervoxel: &p.A}, fettle.Seed{Supervoxel: &p.B}
		req.Merge = m
		return a.agreed(&r.correction, "join them?")
	}
	s, err := a.splitRequest(ctx, r.groups, &r.correction)
	if err != nil {
		return err
	}
	p, err := a.previewSplit(ctx, a.volume, *s, &r.correction)
	if err != nil || r.preview {
		return err
	}
	s.Groups = bySupervoxel(p.Groups)
	req.Split = s
	return a.agreed(&r.correction, "divide it so?")
}

// take makes a task's proposal the correction.
func (r *resolution) take(p *fettle.Proposal) error {
	switch {
	case p == nil:
		return usage("this task proposes no correction").WithNext("give seeds of your own: --group … --group …, or --merge A,B")
	case p.Kind == "merge":
		r.merge = []string{has(p.A), has(p.B)}
	default:
		for _, g := range has(p.Groups) {
			r.groups = append(r.groups, joinIDs(g))
		}
	}
	return nil
}

func (a *app) printDone(d fettle.TaskDone) error {
	fields := []field{{"task", fmt.Sprint(d.Task.Number)}, {"state", string(d.Task.State)}}
	if r := d.Task.Resolution; r != nil {
		fields = append(fields, field{"outcome", string(r.Outcome)})
	}
	if e := d.Entry; e != nil {
		fields = append(fields, field{"entry", fmt.Sprintf("%d, %s", e.Position, e.Kind)},
			field{"retired", joinIDs(e.Before)}, field{"made", joinIDs(e.After)})
	}
	return record(a, d, fields...)
}
