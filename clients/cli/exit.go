package cli

import (
	"context"
	"errors"
	"fmt"
	"io"
	"net"
	"net/url"
	"strings"

	"fettle.example/fettle/internal/fault"
)

// Exit codes.
const (
	ExitOK          = 0
	ExitFailure     = 1 // anything without a code of its own
	ExitUsage       = 2 // the command line or the request is wrong
	ExitNotFound    = 3 // what it names does not exist, or the queue is empty
	ExitConflict    = 4 // it no longer fits: segments retired, claim ended, taken by others
	ExitForbidden   = 5 // not allowed, or not signed in
	ExitUnreachable = 6 // no server answers, or it is too busy: try again later
)

const exitHelp = `Exit codes: 0 done, 1 failed, 2 wrong usage, 3 not found or queue empty, 4 conflict or retired segments,
5 not allowed or not signed in, 6 server unreachable or busy.`

// exitCodes is the one table from kinds of failure to exit codes.
var exitCodes = map[fault.Kind]int{
	fault.Invalid:         ExitUsage,
	fault.NotFound:        ExitNotFound,
	fault.Retired:         ExitConflict,
	fault.Conflict:        ExitConflict,
	fault.Gone:            ExitConflict,
	fault.Forbidden:       ExitForbidden,
	fault.Unauthenticated: ExitForbidden,
	fault.Busy:            ExitUnreachable,
	fault.Internal:        ExitFailure,
}

// usage is a fault of the command line itself.
func usage(format string, args ...any) *fault.Error {
	return fault.Newf(fault.Invalid, "usage", format, args...)
}

// unreachable recognises that no server was spoken to.
func unreachable(err error) bool {
	var sent *url.Error
	var dialled *net.OpError
	return errors.As(err, &sent) || errors.As(err, &dialled)
}

// exitCode tells the code of an error.
func exitCode(err error) int {
	switch {
	case err == nil:
		return ExitOK
	case errors.Is(err, context.Canceled):
		return ExitFailure
	case fault.KindOf(err) == fault.Internal && unreachable(err):
		return ExitUnreachable
	}
	return exitCodes[fault.KindOf(err)]
}

// complain prints what happened and what to do next.
func complain(w io.Writer, err error, server string) {
	what, next := err.Error(), ""
	f, known := fault.As(err)
	switch {
	case errors.Is(err, context.Canceled):
		what = "interrupted"
	case known:
		what, next = f.Message, f.Next
		if f.Field != "" && f.Code != "usage" {
			what += " (in " + f.Field + ")"
		}
	case unreachable(err):
		what = fmt.Sprintf("no answer from %s: %s", server, cause(err))
		next = "check the address with fettle whoami, and that the server runs; then repeat the command"
	}
	fmt.Fprintf(w, "fettle: %s\n", clean(what))
	if known {
		explain(w, f.Data)
	}
	if next != "" {
		fmt.Fprintf(w, "next: %s\n", clean(next))
	}
}

// explain prints the particulars that help: what is current now, and what happened to what was named.
func explain(w io.Writer, data map[string]any) {
	if current, ok := data["current"].([]any); ok && len(current) > 0 {
		fmt.Fprintf(w, "current: %s\n", strings.Trim(fmt.Sprint(current), "[]"))
	}
	entries, _ := data["entries"].([]any)
	for _, item := range entries {
		if e, ok := item.(map[string]any); ok {
			fmt.Fprintf(w, "entry %v: %v by %v at %v: %v became %v\n", e["position"], e["kind"], e["person"], e["at"], e["before"], e["after"])
		}
	}
}

// cause is the innermost of an error's reasons: the outer ones repeat the address.
func cause(err error) string {
	for {
		inner := errors.Unwrap(err)
		if inner == nil {
			return strings.TrimSpace(err.Error())
		}
		err = inner
	}
}
