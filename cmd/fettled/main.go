// Command fettled serves fettle and is the operator's command: it starts the database, brings it up to date, imports
// volumes, adds the first people, serves the API, works in the background, and reconciles the books.
//
// It is wiring only: Config says what is wanted, a Daemon holds what is open, and each command is a few lines over the
// rooms that do the work. See fettled help.
package main

import (
	"context"
	"os"
	"os/signal"
	"syscall"
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	// The first signal asks for an orderly end; from then on a signal does what it does to any program, so a second
	// one kills.
	context.AfterFunc(ctx, stop)
	os.Exit(run(ctx, os.Args[1:], os.Stdin, os.Stdout, os.Stderr))
}
