package cli

import (
	"fmt"
	"slices"
	"strings"
	"time"

	openapi "github.com/oapi-codegen/runtime/types"
	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
)

func (a *app) assignCommand() *cobra.Command {
	var c choice
	var best int
	cmd := &cobra.Command{
		Use:   "assign HANDLE [NUMBER…]",
		Short: "Give tasks to a person: by number, or the best ones",
		Example: `  fettle assign birch 12 15 19
  fettle assign birch --best 30 --kind false-merge`,
		Args: cobra.MinimumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			numbers, err := parseNumbers(args[1:], "a task's number")
			if err != nil {
				return err
			}
			req := fettle.AssignRequest{To: args[0]}
			switch {
			case (len(numbers) > 0) == (best > 0):
				return usage("say which tasks, in one way").WithNext("give numbers, or --best N")
			case best > 0:
				req.Best = &fettle.Best{Count: best, Kind: optional(fettle.TaskKind(c.kind)), Family: optional(c.family)}
			default:
				req.Tasks = &numbers
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			done, err := fettle.Read[fettle.Assigned](a.client.AssignTasks(cmd.Context(), name, req))
			if err != nil {
				return err
			}
			return record(a, done, field{"assigned to " + args[0], count(done.Count, "task")}, field{"tasks", numbersList(has(done.Tasks))})
		},
	}
	c.flags(cmd)
	cmd.Flags().IntVar(&best, "best", 0, "the best `N` open tasks that nobody has")
	return cmd
}

func (a *app) unassignCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "unassign NUMBER…",
		Short: "Let anybody have tasks that were given to a person",
		Args:  cobra.MinimumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			numbers, err := parseNumbers(args, "a task's number")
			if err != nil {
				return err
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			done, err := fettle.Read[fettle.Assigned](a.client.WithdrawTasks(cmd.Context(), name, fettle.WithdrawRequest{Tasks: numbers}))
			if err != nil {
				return err
			}
			return record(a, done, field{"free again", count(done.Count, "task")})
		},
	}
}

func numbersList(numbers []int64) string {
	words := make([]string, len(numbers))
	for i, n := range numbers {
		words[i] = fmt.Sprint(n)
	}
	return strings.Join(words, " ")
}

func (a *app) queueCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "queue",
		Short: "Show what waits, who holds what, and how long it will take",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			q, err := fettle.Read[fettle.Queue](a.client.GetQueue(cmd.Context(), name))
			if err != nil {
				return err
			}
			if a.output == asJSON {
				return writeJSON(a.Out, q)
			}
			if err := a.printOpen(q.Open); err != nil || a.output == asCSV {
				return err
			}
			return a.printQueue(q)
		},
	}
}

func (a *app) printOpen(open []fettle.OpenKind) error {
	return list(a, open,
		left("kind", func(o fettle.OpenKind) string { return string(o.Kind) }),
		left("family", func(o fettle.OpenKind) string { return o.Family }),
		right("open", func(o fettle.OpenKind) string { return fmt.Sprint(o.Tasks) }),
		right("ready", func(o fettle.OpenKind) string { return fmt.Sprint(o.Ready) }),
		right("assigned", func(o fettle.OpenKind) string { return fmt.Sprint(o.Assigned) }),
		right("gain", func(o fettle.OpenKind) string { return fixed(o.Gain, 1) }),
		right("hours", func(o fettle.OpenKind) string { return fixed(o.Minutes/60, 2) }))
}

// printQueue adds to the table of open tasks what is not one: the states, who holds what, and how late the queue is.
func (a *app) printQueue(q fettle.Queue) error {
	var states []string
	for _, s := range []string{"open", "claimed", "resolved", "accepted", "returned", "overtaken"} {
		if n := q.States[s]; n > 0 {
			states = append(states, fmt.Sprintf("%d %s", n, s))
		}
	}
	fields := []field{{"tasks", strings.Join(states, ", ")},
		{"left", fixed(q.Minutes/60, 1) + " hours expected for what is open"},
		{"behind", count(int(q.Lag), "entry not followed yet")}}
	if q.Lag != 1 {
		fields[2].value = fmt.Sprintf("%d entries not followed yet", q.Lag)
	}
	for _, h := range q.Holders {
		fields = append(fields, field{"held", fmt.Sprintf("task %d (%s) by %s since %s, until %s", h.Task, h.Kind, h.Person, a.when(h.At), a.when(h.Until))})
	}
	fmt.Fprintln(a.Out)
	if err := a.lines(a.Out, fields); err != nil {
		return err
	}
	if len(q.Holders) > 0 {
		fmt.Fprintln(a.Out, q.Notice)
	}
	return nil
}

func (a *app) throughputCommand() *cobra.Command {
	var person, from, to, zone string
	cmd := &cobra.Command{
		Use:   "throughput",
		Short: "Show each person's work by day: yours, or as a lead everybody's",
		Long: `Show each person's work by day: tasks by outcome, tasks an active hour, median minutes by kind (Kaplan and Meier,
so that claims without an outcome count too), and the share that reviewers accepted with its 95 % Wilson interval.`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			p := fettle.GetThroughputParams{Person: optional(person), Zone: optional(zone)}
			var err error
			if p.From, err = parseDay(from); err != nil {
				return err
			}
			if p.To, err = parseDay(to); err != nil {
				return err
			}
			name, err := a.volumeName(cmd.Context())
			if err != nil {
				return err
			}
			t, err := fettle.Read[fettle.Throughput](a.client.GetThroughput(cmd.Context(), name, &p))
			if err != nil {
				return err
			}
			if a.output == asJSON {
				return writeJSON(a.Out, t)
			}
			if err := a.printThroughput(t.Items); err != nil {
				return err
			}
			_, err = fmt.Fprintln(a.notices(), t.Notice)
			return err
		},
	}
	f := cmd.Flags()
	f.StringVar(&person, "person", "", "of `HANDLE`")
	f.StringVar(&from, "from", "", "first `DAY`, such as 2026-12-01")
	f.StringVar(&to, "to", "", "last `DAY`")
	f.StringVar(&zone, "zone", "", "whose midnights part the days, such as Europe/Paris (default: UTC)")
	return cmd
}

func (a *app) printThroughput(days []fettle.PersonDay) error {
	if a.output == asTable && a.terminal() {
		return a.drawThroughput(days)
	}
	n := func(name string, value func(fettle.PersonDay) int) column[fettle.PersonDay] {
		return right(name, func(d fettle.PersonDay) string { return fmt.Sprint(value(d)) })
	}
	return list(a, days,
		left("day", func(d fettle.PersonDay) string { return d.Day.Format(time.DateOnly) }),
		left("person", func(d fettle.PersonDay) string { return d.Person }),
		n("resolved", func(d fettle.PersonDay) int { return d.Resolved }),
		n("corrected", func(d fettle.PersonDay) int { return d.Corrected }),
		n("sound", func(d fettle.PersonDay) int { return d.Sound }),
		n("unclear", func(d fettle.PersonDay) int { return d.Unclear }),
		n("released", func(d fettle.PersonDay) int { return d.Released }),
		n("expired", func(d fettle.PersonDay) int { return d.Expired }),
		right("active hours", func(d fettle.PersonDay) string { return fixed(d.ActiveHours, 3) }),
		right("tasks an hour", func(d fettle.PersonDay) string { return measured(d.TasksPerActiveHour, 2) }),
		right("minutes false merge", func(d fettle.PersonDay) string { return medianOf(d.Kinds, "false-merge", 2) }),
		right("minutes false split", func(d fettle.PersonDay) string { return medianOf(d.Kinds, "false-split", 2) }),
		n("reviewed", func(d fettle.PersonDay) int { return d.Reviewed }),
		n("accepted", func(d fettle.PersonDay) int { return d.Accepted }),
		n("returned", func(d fettle.PersonDay) int { return d.Returned }),
		right("share", func(d fettle.PersonDay) string { return shareOf(d, func(s fettle.Share) float64 { return s.Value }) }),
		right("share low", func(d fettle.PersonDay) string { return shareOf(d, func(s fettle.Share) float64 { return s.Low }) }),
		right("share high", func(d fettle.PersonDay) string { return shareOf(d, func(s fettle.Share) float64 { return s.High }) }))
}

// drawThroughput is the same on the width of a terminal.
func (a *app) drawThroughput(days []fettle.PersonDay) error {
	err := list(a, days,
		left("day", func(d fettle.PersonDay) string { return d.Day.Format(time.DateOnly) }),
		left("person", func(d fettle.PersonDay) string { return d.Person }),
		right("resolved", func(d fettle.PersonDay) string { return fmt.Sprint(d.Resolved) }),
		right("outcomes", func(d fettle.PersonDay) string { return fmt.Sprintf("%d/%d/%d", d.Corrected, d.Sound, d.Unclear) }),
		right("given up", func(d fettle.PersonDay) string { return fmt.Sprint(d.Released + d.Expired) }),
		right("hours", func(d fettle.PersonDay) string { return fixed(d.ActiveHours, 2) }),
		right("an hour", func(d fettle.PersonDay) string { return measured(d.TasksPerActiveHour, 1) }),
		right("minutes each", func(d fettle.PersonDay) string {
			return first(medianOf(d.Kinds, "false-merge", 1), "-") + " / " + first(medianOf(d.Kinds, "false-split", 1), "-")
		}),
		right("accepted", func(d fettle.PersonDay) string { return fmt.Sprintf("%d of %d", d.Accepted, d.Reviewed) }),
		right("share", func(d fettle.PersonDay) string {
			if d.AcceptedShare == nil {
				return ""
			}
			return fmt.Sprintf("%s (%s to %s)", percent(d.AcceptedShare.Value), percent(d.AcceptedShare.Low), percent(d.AcceptedShare.High))
		}))
	if err == nil {
		_, err = fmt.Fprintln(a.Out, "outcomes: corrected/sound/unclear; given up: released or run out; hours: active ones; minutes: median for a\n"+
			"false merge / a false split; share: of the reviewed, with its 95 % interval")
	}
	return err
}

func shareOf(d fettle.PersonDay, part func(fettle.Share) float64) string {
	if d.AcceptedShare == nil {
		return ""
	}
	return fixed(part(*d.AcceptedShare), 3)
}

func medianOf(kinds []fettle.KindTime, kind fettle.TaskKind, decimals int) string {
	i := slices.IndexFunc(kinds, func(k fettle.KindTime) bool { return k.Kind == kind })
	if i < 0 {
		return ""
	}
	return measured(kinds[i].MedianMinutes, decimals)
}

// measured writes a figure that may be unknown.
func measured(v *float64, decimals int) string {
	if v == nil {
		return ""
	}
	return fixed(*v, decimals)
}

func parseDay(word string) (*openapi.Date, error) {
	if word == "" {
		return nil, nil
	}
	t, err := time.Parse(time.DateOnly, word)
	if err != nil {
		return nil, usage("%q is not a day", word).WithNext("give a day such as 2026-12-01")
	}
	return &openapi.Date{Time: t}, nil
}
