package cli_test

import (
	"context"
	"errors"
	"log/slog"
	"net/http/httptest"
	"os"
	"os/exec"
	"strconv"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"

	"fettle.example/fettle/api"
	"fettle.example/fettle/clients/cli"
	"fettle.example/fettle/internal/pgtest"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/base"
	"fettle.example/fettle/tasks"
	"fettle.example/fettle/triage"
)

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){
		"fettle": func() {
			os.Exit(cli.Run(context.Background(), os.Args[1:], cli.Streams{In: os.Stdin, Out: os.Stdout, Err: os.Stderr}))
		},
	})
}

// team is who works in every script.
var team = map[string][]tasks.Role{
	"rowan": {tasks.Lead}, "alder": {tasks.Proofreader}, "birch": {tasks.Proofreader, tasks.Reviewer}, "cedar": nil,
}

// house is the server of one script.
type house struct {
	volume *ledger.Volume
	queue  *tasks.Queue
}

type houseKey struct{}

// The scripts drive the real command against a real server with the delivery testdata/deliveries/tiny, each its own.
// Commands of their own: "as HANDLE" signs a person in, "exits CODE fettle …" wants an exit code, "follow" lets triage
// and tasks read the entries that were posted.
func TestScripts(t *testing.T) {
	testscript.Run(t, testscript.Params{
		Dir:                 "testdata",
		RequireExplicitExec: true,
		Setup:               func(env *testscript.Env) error { return open(t, env) },
		Cmds: map[string]func(*testscript.TestScript, bool, []string){
			"as": func(ts *testscript.TestScript, _ bool, args []string) {
				ts.Setenv("FETTLE_TOKEN", ts.Getenv("TOKEN_"+args[0]))
			},
			"exits": exits,
			"follow": func(ts *testscript.TestScript, _ bool, _ []string) {
				h := ts.Value(houseKey{}).(*house)
				_, err := triage.Follow(context.Background(), h.volume)
				ts.Check(err)
				_, err = h.queue.Follow(context.Background(), h.volume)
				ts.Check(err)
			},
		},
	})
}

func exits(ts *testscript.TestScript, _ bool, args []string) {
	want, err := strconv.Atoi(args[0])
	ts.Check(err)
	err = ts.Exec(args[1], args[2:]...)
	got := 0
	var exit *exec.ExitError
	switch {
	case errors.As(err, &exit):
		got = exit.ExitCode()
	case err != nil:
		ts.Fatalf("%s: %v", strings.Join(args[1:], " "), err)
	}
	if got != want {
		ts.Fatalf("%s: exit code %d, want %d", strings.Join(args[1:], " "), got, want)
	}
}

// open serves a fresh volume and tells the script where, and who may come.
func open(t *testing.T, env *testscript.Env) error {
	ctx := context.Background()
	pool := pgtest.New(t)
	if _, err := base.Import(ctx, pool, "../../testdata/deliveries/tiny", base.ImportOptions{}); err != nil {
		return err
	}
	led := ledger.New(pool)
	people, queue := tasks.NewPeople(pool), tasks.NewQueue(led, pool)
	v, err := led.Volume(ctx, "tiny")
	if err != nil {
		return err
	}
	if err := triage.Full(ctx, v, nil); err != nil {
		return err
	}
	if _, err := queue.Fill(ctx, v); err != nil {
		return err
	}
	for handle, roles := range team {
		if _, err := people.Add(ctx, tasks.Operator, handle, roles); err != nil {
			return err
		}
		secret, _, err := people.IssueToken(ctx, tasks.Operator, handle, "script")
		if err != nil {
			return err
		}
		env.Setenv("TOKEN_"+handle, secret)
	}
	log := slog.New(slog.NewTextHandler(t.Output(), nil))
	server := httptest.NewServer(api.New(api.Config{Pool: pool, Ledger: led, People: people, Queue: queue, Log: log}).Handler())
	env.Defer(server.Close)
	env.Setenv("FETTLE_URL", server.URL)
	env.Setenv("GORACE", "atexit_sleep_ms=0") // under the race detector a program else waits a second at its end
	env.Setenv("XDG_CONFIG_HOME", env.WorkDir+"/config")
	env.Values[houseKey{}] = &house{v, queue}
	return nil
}
