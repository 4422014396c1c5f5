package cli

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"net/url"
	"strings"
	"testing"

	"fettle.example/fettle/internal/fault"
)

func TestEveryKindOfFailureHasAnExitCode(t *testing.T) {
	kinds := []fault.Kind{fault.Invalid, fault.NotFound, fault.Retired, fault.Conflict, fault.Forbidden,
		fault.Unauthenticated, fault.Busy, fault.Gone, fault.Internal}
	if len(kinds) != len(exitCodes) {
		t.Errorf("%d kinds, %d codes", len(kinds), len(exitCodes))
	}
	for _, k := range kinds {
		if exitCode(fmt.Errorf("wrapped: %w", fault.New(k, "code", "message"))) == ExitOK {
			t.Errorf("%s ends as if it had worked", k)
		}
	}
}

func TestExitCodes(t *testing.T) {
	lost := &url.Error{Op: "Get", URL: "http://fettle.example", Err: errors.New("connection refused")}
	for _, c := range []struct {
		err  error
		want int
	}{
		{nil, 0},
		{errors.New("disk full"), 1},
		{usage("what?"), 2},
		{fault.New(fault.NotFound, "queue-empty", "nothing waits"), 3},
		{fault.New(fault.Retired, "segment-retired", "gone"), 4},
		{fault.New(fault.Unauthenticated, "token-missing", "who?"), 5},
		{lost, 6},
		{&url.Error{Op: "Get", URL: "http://fettle.example", Err: context.Canceled}, 1},
	} {
		if got := exitCode(c.err); got != c.want {
			t.Errorf("%v: exit %d, want %d", c.err, got, c.want)
		}
	}
}

func TestComplaintsSayWhatAndWhatNext(t *testing.T) {
	var b bytes.Buffer
	complain(&b, fault.New(fault.NotFound, "queue-empty", "no task waits for you").WithNext("ask a lead"), "")
	if want := "fettle: no task waits for you\nnext: ask a lead\n"; b.String() != want {
		t.Errorf("got %q", b.String())
	}
	b.Reset()
	lost := &url.Error{Op: "Get", URL: "http://fettle.example/v1/me", Err: errors.New("connection refused")}
	complain(&b, lost, "http://fettle.example")
	if !strings.HasPrefix(b.String(), "fettle: no answer from http://fettle.example: connection refused\nnext: ") {
		t.Errorf("got %q", b.String())
	}
}
