package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"fettle.example/fettle/internal/fault"
)

// Exit codes: the same words for operators as for people.
const (
	exitOK      = 0
	exitFailure = 1
	exitUsage   = 2
)

// operator is what every command shares.
type operator struct {
	config   Config
	settings *pflag.FlagSet
	file     string // of --config
	in       io.Reader
	out, err io.Writer
	log      *slog.Logger
}

// run is the whole program, without the process around it.
func run(ctx context.Context, args []string, in io.Reader, out, errs io.Writer) int {
	o := &operator{in: in, out: out, err: errs}
	o.settings = o.config.settings()
	root := o.root()
	root.SetArgs(args)
	root.SetIn(in)
	root.SetOut(out)
	root.SetErr(errs)
	err := root.ExecuteContext(ctx)
	if err == nil {
		return exitOK
	}
	if o.log == nil && fault.KindOf(err) == fault.Internal {
		err = fault.New(fault.Invalid, "usage", err.Error()).WithNext("see fettled help") // cobra's own refusal
	}
	o.complain(err)
	if fault.KindOf(err) == fault.Invalid && fault.CodeOf(err) != "delivery-refused" {
		return exitUsage
	}
	return exitFailure
}

func (o *operator) root() *cobra.Command {
	root := &cobra.Command{
		Use:   "fettled",
		Short: "Serve fettle: ledger, triage and task queue for proofreading segmented volumes",
		Long: `fettled serves fettle and is the operator's command.

Every setting can stand on the command line, in the environment (FETTLE_DATABASE_URL, FETTLE_DATA, FETTLE_LISTEN …)
or in ` + configFile + ` in the working folder (database = "…", listen = "…"); the first of these that has it wins.
Without a database address a private PostgreSQL is started from this machine's own programs.`,
		SilenceUsage: true, SilenceErrors: true,
		PersistentPreRunE: func(cmd *cobra.Command, _ []string) error {
			if err := fill(o.settings, o.file, os.LookupEnv); err != nil {
				return err
			}
			level := slog.LevelInfo
			if o.config.Verbose {
				level = slog.LevelDebug
			}
			o.log = slog.New(slog.NewTextHandler(o.err, &slog.HandlerOptions{Level: level}))
			return nil
		},
	}
	root.PersistentFlags().StringVar(&o.file, "config", "", "read settings from this `FILE` (default "+configFile+" if there)")
	root.SetFlagErrorFunc(func(cmd *cobra.Command, err error) error {
		return fault.New(fault.Invalid, "usage", err.Error()).WithNext("see " + cmd.CommandPath() + " --help")
	})
	root.AddCommand(o.serveCommand(), o.workCommand(), o.migrateCommand(), o.postgresCommand(),
		o.importCommand(), o.triageCommand(), o.reconcileCommand(),
		o.personCommand(), o.tokenCommand(), o.demoCommand())
	for _, cmd := range root.Commands() {
		o.use(cmd, "data", "verbose")
	}
	return root
}

// noun makes a command that only holds others, and refuses a word that is none of them.
func noun(name, short string, commands ...*cobra.Command) *cobra.Command {
	cmd := &cobra.Command{Use: name, Short: short, RunE: func(cmd *cobra.Command, args []string) error {
		if len(args) > 0 {
			return fault.Newf(fault.Invalid, "usage", "there is no command %q", cmd.CommandPath()+" "+args[0]).
				WithNext("see " + cmd.CommandPath() + " --help")
		}
		return cmd.Help()
	}}
	cmd.AddCommand(commands...)
	return cmd
}

// use gives a command settings of these names.
func (o *operator) use(cmd *cobra.Command, names ...string) {
	for _, name := range names {
		cmd.PersistentFlags().AddFlag(o.settings.Lookup(name))
	}
}

// with opens the house for one command, and closes it whatever comes.
func (o *operator) with(ctx context.Context, fn func(d *Daemon) error) (err error) {
	d, err := Open(ctx, o.config, o.log)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, d.Close()) }()
	return fn(d)
}

// complain says what happened and what to do next; the cause too, since the operator is who can mend it.
func (o *operator) complain(err error) {
	if errors.Is(err, context.Canceled) {
		fmt.Fprintln(o.err, "fettled: interrupted")
		return
	}
	f, known := fault.As(err)
	if !known {
		fmt.Fprintf(o.err, "fettled: %v\n", err)
		return
	}
	what := f.Message
	if f.Err != nil {
		what += ": " + f.Err.Error()
	}
	fmt.Fprintf(o.err, "fettled: %s\n", what)
	if f.Next != "" {
		fmt.Fprintf(o.err, "next: %s\n", f.Next)
	}
}
