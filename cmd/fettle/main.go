// Command fettle is for proofreaders, reviewers, leads and auditors. See fettle help.
package main

import (
	"context"
	"os"

	"fettle.example/fettle/clients/cli"
)

func main() {
	os.Exit(cli.Run(context.Background(), os.Args[1:], cli.Streams{In: os.Stdin, Out: os.Stdout, Err: os.Stderr}))
}
