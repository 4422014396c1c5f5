package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"fettle.example/fettle/internal/demo"
	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/synth"
	"fettle.example/fettle/tasks"
)

// Where the demonstration lives unless told otherwise: in the working folder, or, when root works where PostgreSQL's
// user cannot reach, beside other temporary data.
const (
	demoData      = ".demo"
	demoElsewhere = "/var/tmp/fettle-demo"
)

func (o *operator) demoCommand() *cobra.Command {
	var keep bool
	var each int
	cmd := &cobra.Command{
		Use:   "demo",
		Short: "Show the main job on an invented volume, with a simulated team",
		Long: `Start a private PostgreSQL, invent and import the volume cricket-ganglion, triage it, serve it, and let a small
simulated team work through a first batch of tasks by the API; then report what happened. When the data folder holds
the volume already, the team goes on with the next batch.`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			if !o.settings.Changed("data") {
				o.config.Data = demoData
			}
			if !o.settings.Changed("listen") {
				o.config.Listen = "127.0.0.1:0"
			}
			o.config.Database = ""
			if !o.config.Verbose {
				o.log = slog.New(slog.NewTextHandler(o.err, &slog.HandlerOptions{Level: slog.LevelWarn}))
			}
			began := time.Now()
			d, err := Open(cmd.Context(), o.config, o.log)
			if fault.CodeOf(err) == "folder-closed" && !o.settings.Changed("data") {
				o.config.Data = demoElsewhere
				d, err = Open(cmd.Context(), o.config, o.log)
			}
			if err != nil {
				return err
			}
			s := &show{operator: o, Daemon: d, keep: keep, each: each, began: began}
			return errors.Join(s.run(cmd.Context()), d.Close())
		},
	}
	cmd.Flags().BoolVar(&keep, "keep", false, "stay up afterwards, until interrupted")
	cmd.Flags().IntVar(&each, "tasks", 30, "how many `TASKS` each proofreader resolves")
	o.use(cmd, "fetch-postgres", "listen")
	return cmd
}

// show is one run of the demonstration.
type show struct {
	*operator
	*Daemon
	keep  bool
	each  int
	began time.Time
}

// lapse is how much faster than life the simulated people think: a minute is a fifth of a second.
const lapse = 300

func (s *show) run(ctx context.Context) error {
	rows, shape, _ := synth.Make(synth.Options{})
	if err := s.volume(ctx, rows, shape); err != nil {
		return err
	}
	tokens, err := s.people(ctx)
	if err != nil {
		return err
	}
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	address := make(chan string, 1)
	stopped := make(chan error, 1)
	go func() { stopped <- s.Daemon.Run(ctx, true, true, func(a string) { address <- a }) }()
	select {
	case err := <-stopped:
		return err
	case a := <-address:
		team := &demo.Team{URL: "http://" + a, Volume: rows.Name, Tokens: tokens, Truth: rows.Truth(), Tasks: s.each, Lapse: lapse}
		if err := s.perform(ctx, team); err != nil {
			cancel()
			return errors.Join(err, <-stopped)
		}
		s.farewell(team)
	}
	if !s.keep {
		cancel()
	}
	return <-stopped
}

// volume imports the invented volume, unless an earlier run did.
func (s *show) volume(ctx context.Context, rows *synth.Rows, shape synth.Shape) error {
	_, err := s.Ledger.Volume(ctx, rows.Name)
	if err == nil {
		fmt.Fprintf(s.out, "going on with volume %s in %s\n", rows.Name, s.operator.config.Data)
		return nil
	}
	if fault.KindOf(err) != fault.NotFound {
		return err
	}
	dir, err := os.MkdirTemp("", "fettle-delivery-")
	if err != nil {
		return err
	}
	defer os.RemoveAll(dir)
	if err := rows.Write(dir, shape); err != nil {
		return err
	}
	report, err := s.importDelivery(ctx, s.Daemon, dir, "")
	if err != nil {
		return err
	}
	return s.triage(ctx, s.Daemon, report.Info.Name)
}

// people makes sure that the team is there, and gives everybody a token for this run.
func (s *show) people(ctx context.Context) (map[string]string, error) {
	tokens := map[string]string{}
	for _, handle := range append([]string{demo.Lead}, demo.Proofreaders...) {
		var roles []tasks.Role
		for _, r := range demo.Roles[handle] {
			roles = append(roles, tasks.Role(r))
		}
		_, err := s.People.Get(ctx, handle)
		if fault.KindOf(err) == fault.NotFound {
			_, err = s.People.Add(ctx, tasks.Operator, handle, roles)
		}
		if err != nil {
			return nil, err
		}
		if tokens[handle], _, err = s.People.IssueToken(ctx, tasks.Operator, handle, "demonstration"); err != nil {
			return nil, err
		}
	}
	return tokens, nil
}

func (s *show) perform(ctx context.Context, team *demo.Team) error {
	p := newProgress(s.err)
	team.Tell = func(done, total int) { p.step("team", int64(done), int64(total), "tasks") }
	err := team.Work(ctx)
	p.end()
	if err != nil {
		return err
	}
	return team.Report(ctx, s.out)
}

// farewell says how to go on.
func (s *show) farewell(team *demo.Team) {
	bin := filepath.Dir(os.Args[0])
	url := team.URL
	fmt.Fprintf(s.out, "\nThat took %.0f s; the team thought %d times faster than people. Go on with\n", time.Since(s.began).Seconds(), lapse)
	if !s.keep {
		url = "http://127.0.0.1:7400"
		fmt.Fprintf(s.out, "  %s serve --data %s &\n", filepath.Join(bin, "fettled"), s.operator.config.Data)
	}
	fmt.Fprintf(s.out, "  export FETTLE_URL=%s\n", url)
	fettle := filepath.Join(bin, "fettle")
	for _, next := range []struct{ handle, commands string }{
		{"alder", "claim"}, {"birch", "reviews"}, {demo.Lead, "throughput"},
	} {
		fmt.Fprintf(s.out, "  FETTLE_TOKEN=%s %s %s    # as %s\n", team.Tokens[next.handle], fettle, next.commands, next.handle)
	}
	if s.keep {
		fmt.Fprintf(s.out, "serving on %s until interrupted\n", team.URL)
	}
}
