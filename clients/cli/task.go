package cli

import (
	"context"
	"fmt"
	"net/http"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
)

// choice narrows tasks down by what they are about.
type choice struct{ kind, family string }

func (c *choice) flags(cmd *cobra.Command) {
	cmd.Flags().StringVar(&c.kind, "kind", "", "`KIND`: false-merge or false-split")
	cmd.Flags().StringVar(&c.family, "family", "", "`FAMILY` of detectors: see fettle detectors")
	_ = cmd.RegisterFlagCompletionFunc("kind", cobra.FixedCompletions([]string{"false-merge", "false-split"}, cobra.ShellCompDirectiveNoFileComp))
}

func (a *app) taskCommand() *cobra.Command {
	return noun("task", "Look at one task", &cobra.Command{
		Use:   "show [NUMBER]",
		Short: "Show a task: place, evidence, proposal and history; without a number, the one you hold",
		Args:  cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			number, err := a.numberOrHeld(cmd.Context(), args)
			if err != nil {
				return err
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			t, err := fettle.Read[fettle.Task](a.client.GetTask(cmd.Context(), name, number))
			if err != nil {
				return err
			}
			return a.printTask(t)
		},
	})
}

func (a *app) numberOrHeld(ctx context.Context, args []string) (int64, error) {
	if len(args) == 1 {
		return parseNumber(args[0], "a task's number")
	}
	t, err := a.heldTask(ctx, nil)
	return t.Number, err
}

// printTask shows all that a person needs to judge a place.
func (a *app) printTask(t fettle.Task) error {
	fields := []field{
		{"task", fmt.Sprint(t.Number)}, {"state", string(t.State)}, {"suspicion", string(t.Kind) + ", by " + t.Family},
		{"said", t.Said}, {"segments", strings.Join(t.Segments, " ")}, {"point nm", point(t.PointNm)}, {"look", link(t)},
		{"probability", percent(t.Probability)},
		{"gain", fixed(t.Gain, 1) + " synapses expected"}, {"expected time", fixed(t.Minutes, 1) + " min"},
		{"proposal", proposal(t.Proposal)}, {"assigned to", has(t.AssignedTo)},
	}
	fields = append(fields, findings(t.Findings)...)
	if c := t.Claim; c != nil && c.Ended == nil {
		fields = append(fields, field{"claimed", fmt.Sprintf("by %s until %s", c.Person, a.when(c.Until))})
	}
	if r := t.Resolution; r != nil {
		what := fmt.Sprintf("%s by %s at %s", r.Outcome, r.Person, a.when(r.At))
		if r.Position != nil {
			what += fmt.Sprintf(", entry %d", *r.Position)
		}
		fields = append(fields, field{"resolved", withNote(what, r.Note)})
	}
	if r := t.Review; r != nil {
		what := fmt.Sprintf("%s by %s at %s", reviewed[r.Verdict], r.Person, a.when(r.At))
		if r.Reversal != nil {
			what += fmt.Sprintf(", undone by entry %d", *r.Reversal)
		}
		fields = append(fields, field{"review", withNote(what, r.Note)})
	}
	for _, e := range has(t.Events) {
		fields = append(fields, field{"history", withNote(strings.TrimSpace(a.when(e.At)+" "+e.What+" "+has(e.Person)), has(e.Note))})
	}
	return record(a, t, fields...)
}

// findings shows the weightiest finding of each detector whole, and counts the others of it nearby, which say nearly the same.
func findings(all []fettle.Finding) (out []field) {
	more := make(map[string]int)
	for _, f := range all {
		more[f.Detector]++
	}
	for _, f := range all {
		n := more[f.Detector]
		if n == 0 {
			continue
		}
		more[f.Detector] = 0
		said := fmt.Sprintf("%s: %s", f.Detector, f.Said)
		if n > 1 {
			said += fmt.Sprintf(" (and %d like it nearby)", n-1)
		}
		out = append(out, field{"finding", said})
		for _, e := range f.Evidence {
			out = append(out, field{"", "  " + strings.TrimSpace(e.Name+" "+number(e.Value, 2)+" "+has(e.Unit))})
		}
	}
	return out
}

// reviewed says a verdict as something that happened.
var reviewed = map[fettle.Verdict]string{"accept": "accepted", "return": "returned"}

func withNote(what, note string) string {
	if note != "" {
		what += ": " + note
	}
	return what
}

// link is an address in the team's own viewer, by the template in FETTLE_LINK.
func link(t fettle.Task) string {
	template := os.Getenv("FETTLE_LINK")
	if template == "" || len(t.PointNm) != 3 {
		return ""
	}
	segment := ""
	if len(t.Segments) > 0 {
		segment = t.Segments[0]
	}
	return strings.NewReplacer("{x}", fixed(t.PointNm[0], 0), "{y}", fixed(t.PointNm[1], 0), "{z}", fixed(t.PointNm[2], 0),
		"{segment}", segment, "{segments}", strings.Join(t.Segments, ",")).Replace(template)
}

func proposal(p *fettle.Proposal) string {
	switch {
	case p == nil:
		return "none: look, and choose seeds yourself"
	case p.Kind == "merge":
		return fmt.Sprintf("merge %s %s", has(p.A), has(p.B))
	}
	var groups []string
	for _, g := range has(p.Groups) {
		groups = append(groups, "--group "+strings.Join(g, ","))
	}
	return "split " + strings.Join(groups, " ")
}

func (a *app) tasksCommand() *cobra.Command {
	var c choice
	var state, assigned, person, segment string
	var mine bool
	var limit int
	cmd := &cobra.Command{
		Use:   "tasks",
		Short: "List tasks, the open ones unless told otherwise, most worth doing first",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			if mine {
				held, err := listOf[fettle.Task](a.client.ListClaims(cmd.Context(), name))
				if err != nil {
					return err
				}
				return a.printTasks(held)
			}
			if state == "" && person == "" {
				state = "open"
			}
			if state == "all" {
				state = ""
			}
			p := fettle.ListTasksParams{State: optional(fettle.TaskState(state)), Kind: optional(fettle.TaskKind(c.kind)),
				Family: optional(c.family), AssignedTo: optional(assigned), Person: optional(person), Segment: optional(segment)}
			tasks, err := every[fettle.Task](limit, func(cursor *string, n *int) (*http.Response, error) {
				p.Cursor, p.Limit = cursor, n
				return a.client.ListTasks(cmd.Context(), name, &p)
			})
			if err != nil {
				return err
			}
			return a.printTasks(tasks)
		},
	}
	c.flags(cmd)
	f := cmd.Flags()
	f.StringVar(&state, "state", "", "`STATE`: open (default), claimed, resolved, accepted, returned, overtaken, or all (default with --person)")
	f.StringVar(&assigned, "assigned", "", "assigned to `HANDLE`")
	f.StringVar(&person, "person", "", "claimed or resolved by `HANDLE`")
	f.StringVar(&segment, "segment", "", "about this `SEGMENT`")
	f.BoolVar(&mine, "mine", false, "those that you hold")
	f.IntVar(&limit, "limit", 50, "at most so many (0: all)")
	_ = cmd.RegisterFlagCompletionFunc("state", cobra.FixedCompletions(
		[]string{"open", "claimed", "resolved", "accepted", "returned", "overtaken", "all"}, cobra.ShellCompDirectiveNoFileComp))
	return cmd
}

func (a *app) printTasks(tasks []fettle.Task) error {
	return list(a, tasks,
		right("task", func(t fettle.Task) string { return fmt.Sprint(t.Number) }),
		left("state", func(t fettle.Task) string { return string(t.State) }),
		left("kind", func(t fettle.Task) string { return string(t.Kind) }),
		left("family", func(t fettle.Task) string { return t.Family }),
		right("probability", func(t fettle.Task) string { return fixed(t.Probability, 2) }),
		right("gain", func(t fettle.Task) string { return fixed(t.Gain, 1) }),
		right("minutes", func(t fettle.Task) string { return fixed(t.Minutes, 1) }),
		right("waits", func(t fettle.Task) string { return positive(int64(t.Waits)) }),
		left("person", taskPerson),
		left("outcome", func(t fettle.Task) string {
			if t.Resolution == nil {
				return ""
			}
			return string(t.Resolution.Outcome)
		}),
		left("segments", func(t fettle.Task) string { return strings.Join(t.Segments, " ") }))
}

// taskPerson is who resolved a task, or holds it, or has it assigned.
func taskPerson(t fettle.Task) string {
	switch {
	case t.Resolution != nil:
		return t.Resolution.Person
	case t.Claim != nil && t.Claim.Ended == nil:
		return t.Claim.Person
	}
	return has(t.AssignedTo)
}
