package cli

import (
	"context"
	"io"
	"net/http"
	"os"
	"os/signal"
	"slices"
	"syscall"
	"time"

	"github.com/google/uuid"
	"github.com/spf13/cobra"

	"fettle.example/fettle/clients/fettle"
	"fettle.example/fettle/internal/fault"
)

// Streams are where a command reads and writes.
type Streams struct {
	In       io.Reader
	Out, Err io.Writer
}

// app is what every command shares.
type app struct {
	Streams
	url    string // where the server is
	token  string // who asks
	volume string // which volume is meant
	output string
	began  bool // the command line was understood
	client *fettle.Client
}

// Run is the whole command without the process around it; it returns the exit code. An interrupt ends what runs, and
// a second one the process.
func Run(ctx context.Context, args []string, s Streams) int {
	ctx, stop := signal.NotifyContext(ctx, os.Interrupt, syscall.SIGTERM)
	defer stop()
	context.AfterFunc(ctx, stop)
	a := &app{Streams: s}
	root := a.root()
	root.SetArgs(args)
	root.SetIn(s.In)
	root.SetOut(s.Out)
	root.SetErr(s.Err)
	cmd, err := root.ExecuteContextC(ctx)
	if err != nil && !a.began && fault.CodeOf(err) != "usage" {
		err = usage("%v", err).WithNext("see " + cmd.CommandPath() + " --help") // cobra's own refusal: of a command or of arguments
	}
	if err != nil {
		complain(s.Err, err, a.url)
	}
	return exitCode(err)
}

// Groups of commands in the help.
const (
	groupWork  = "work"
	groupBooks = "books"
	groupLead  = "lead"
	groupHere  = "here"
)

func (a *app) root() *cobra.Command {
	root := &cobra.Command{
		Use:   "fettle",
		Short: "Proofread segmented volumes: tasks, corrections and the ledger of them",
		Long: `fettle is the command of proofreaders, reviewers, leads and auditors. It speaks to a fettled server.

The server, the token and the volume come from --url, --volume, from FETTLE_URL, FETTLE_TOKEN and FETTLE_VOLUME, or
from what fettle login kept. FETTLE_LINK, an address with {x} {y} {z} (nm) and {segment} in it, makes fettle show
where to look in your own viewer.

` + exitHelp,
		SilenceUsage: true, SilenceErrors: true,
		PersistentPreRunE: func(*cobra.Command, []string) error {
			a.began = true
			return a.checkOutput()
		},
	}
	f := root.PersistentFlags()
	f.StringVar(&a.url, "url", "", "`ADDRESS` of the server")
	f.StringVarP(&a.volume, "volume", "V", "", "`NAME` of the volume")
	f.StringVarP(&a.output, "output", "o", asTable, "`FORM` of what is printed: table, json or csv")
	root.SetFlagErrorFunc(func(cmd *cobra.Command, err error) error {
		return usage("%v", err).WithNext("see " + cmd.CommandPath() + " --help")
	})
	_ = root.RegisterFlagCompletionFunc("output", cobra.FixedCompletions([]string{asTable, asJSON, asCSV}, cobra.ShellCompDirectiveNoFileComp))
	_ = root.RegisterFlagCompletionFunc("volume", a.completeVolumes)
	root.AddGroup(&cobra.Group{ID: groupWork, Title: "Proofreading and reviewing:"},
		&cobra.Group{ID: groupBooks, Title: "Segments, neurons and the ledger:"},
		&cobra.Group{ID: groupLead, Title: "Leading:"},
		&cobra.Group{ID: groupHere, Title: "Signing in:"})
	a.add(root, groupWork, a.claimCommand(), a.taskCommand(), a.tasksCommand(), a.releaseCommand(), a.extendCommand(),
		a.resolveCommand(), a.reviewsCommand(), a.reviewCommand())
	a.add(root, groupBooks, a.volumesCommand(), a.volumeCommand(), a.segmentCommand(), a.neuronCommand(),
		a.mergeCommand(), a.splitCommand(), a.reverseCommand(), a.entriesCommand(), a.entryCommand(),
		a.ledgerCommand())
	a.add(root, groupLead, a.queueCommand(), a.assignCommand(), a.unassignCommand(), a.throughputCommand(),
		a.detectorsCommand(), a.findingsCommand(), a.qualityCommand(),
		a.peopleCommand(), a.personCommand(), a.tokenCommand())
	a.add(root, groupHere, a.loginCommand(), a.logoutCommand(), a.whoamiCommand())
	return root
}

func (a *app) add(root *cobra.Command, group string, commands ...*cobra.Command) {
	for _, c := range commands {
		c.GroupID = group
		root.AddCommand(c)
	}
}

// noun makes a command that only holds others. A word that is none of them is refused, where cobra would show help
// and call it success.
func noun(name, short string, commands ...*cobra.Command) *cobra.Command {
	cmd := &cobra.Command{Use: name, Short: short, RunE: func(cmd *cobra.Command, args []string) error {
		if len(args) > 0 {
			return usage("there is no command %q", cmd.CommandPath()+" "+args[0]).WithNext("see " + cmd.CommandPath() + " --help")
		}
		return cmd.Help()
	}}
	cmd.AddCommand(commands...)
	return cmd
}

func (a *app) checkOutput() error {
	if !slices.Contains([]string{asTable, asJSON, asCSV}, a.output) {
		return usage("there is no output %q", a.output).WithNext("use --output table, json or csv")
	}
	return nil
}

// connect makes the client of the server that is meant: by flag, else by environment, else by the login file.
func (a *app) connect() error {
	if a.client != nil {
		return nil
	}
	a.url = first(a.url, os.Getenv("FETTLE_URL"))
	a.token = first(a.token, os.Getenv("FETTLE_TOKEN"))
	a.volume = first(a.volume, os.Getenv("FETTLE_VOLUME"))
	if a.url == "" || a.token == "" || a.volume == "" {
		if err := a.recall(); err != nil {
			return err
		}
	}
	if a.url == "" {
		return usage("no server is named").WithNext("sign in with fettle login --url URL, or set FETTLE_URL and FETTLE_TOKEN")
	}
	return a.dial()
}

// recall fills in from the login file what nothing else said. A kept token is for the kept server alone.
func (a *app) recall() error {
	path, err := loginPath()
	if err != nil {
		return nil // without a settings folder there is nothing to recall
	}
	kept, err := readLogin(path)
	if err != nil {
		return err
	}
	a.url = first(a.url, kept.URL)
	if a.url == kept.URL {
		a.token = first(a.token, kept.Token)
		a.volume = first(a.volume, kept.Volume)
	}
	return nil
}

func (a *app) dial() error {
	client, err := fettle.NewClient(a.url,
		fettle.WithHTTPClient(&http.Client{Transport: newRepeater(), Timeout: 10 * time.Minute}),
		fettle.WithRequestEditorFn(func(_ context.Context, req *http.Request) error {
			req.Header.Set("User-Agent", "fettle") // entries name the program that posted them
			if a.token != "" {
				req.Header.Set("Authorization", "Bearer "+a.token)
			}
			return nil
		}))
	if err != nil {
		return usage("%q is no address of a server", a.url).WithNext("give one such as http://127.0.0.1:7400").Wrap(err)
	}
	a.client = client
	return nil
}

// volumeName is the volume that is meant; the only one there is needs no naming.
func (a *app) volumeName(ctx context.Context) (string, error) {
	if err := a.connect(); err != nil {
		return "", err
	}
	if a.volume != "" {
		return a.volume, nil
	}
	volumes, err := a.volumes(ctx)
	if err != nil {
		return "", err
	}
	switch len(volumes) {
	case 0:
		return "", fault.New(fault.NotFound, "no-volume", "the server has no volume").WithNext("ask the operator to import one: fettled import DIR")
	case 1:
		a.volume = volumes[0].Name
		return a.volume, nil
	}
	return "", usage("the server has %d volumes, and none is named", len(volumes)).WithNext("choose with --volume, or FETTLE_VOLUME")
}

// first is the first text that says something.
func first(texts ...string) string {
	for _, t := range texts {
		if t != "" {
			return t
		}
	}
	return ""
}

// newKey makes the idempotency key of one command.
func newKey() uuid.UUID { return uuid.Must(uuid.NewV7()) }
