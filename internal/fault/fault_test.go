package fault

import (
	"errors"
	"fmt"
	"io"
	"testing"
)

func TestKindSurvivesWrapping(t *testing.T) {
	inner := New(Conflict, "already-joined", "they are one segment").WithNext("go on").Wrap(io.ErrUnexpectedEOF)
	err := fmt.Errorf("merge: %w", inner)
	if KindOf(err) != Conflict || CodeOf(err) != "already-joined" {
		t.Errorf("got %s %s", KindOf(err), CodeOf(err))
	}
	if !errors.Is(err, io.ErrUnexpectedEOF) {
		t.Error("the cause is lost")
	}
	if !errors.Is(err, New(Conflict, "already-joined", "")) || errors.Is(err, New(Conflict, "other", "")) {
		t.Error("kind and code are what errors.Is compares")
	}
}

func TestUnknownErrorsAreInternal(t *testing.T) {
	if KindOf(nil) != "" || KindOf(io.EOF) != Internal || CodeOf(io.EOF) != "" {
		t.Error("nil has no kind; a stranger is internal")
	}
}

func TestWithLeavesTheOriginalAlone(t *testing.T) {
	pattern := New(Gone, "claim-ended", "the claim has ended")
	first := pattern.WithData("claim", "1").WithField("claim")
	second := first.WithData("task", 2)
	if pattern.Data != nil || pattern.Field != "" || len(first.Data) != 1 || len(second.Data) != 2 {
		t.Errorf("shared state: %v %v %v", pattern, first, second)
	}
}
