// Package fault holds the kinds of failure that the program tells its users about.
//
// An error that concerns the person who asked is an [*Error]: a kind that a program can act on, a stable code, a
// sentence for the person, and what to do next. It wraps its cause, which is for the operator's log alone. Any other
// error is Internal: whole inside, a bare "internal" outside.
//
// The package knows nothing of HTTP, SQL or exit codes; the edges map kinds, each in one table.
package fault

import (
	"errors"
	"fmt"
)

// Kind says what sort of failure it is, and so what a caller can do.
type Kind string

// Kinds.
const (
	Invalid         Kind = "invalid"         // the request is wrong whatever the state
	NotFound        Kind = "not-found"       // it names something that does not exist
	Retired         Kind = "retired"         // it names segments that were current once and are not now
	Conflict        Kind = "conflict"        // it does not fit the present state
	Forbidden       Kind = "forbidden"       // this person may not do it
	Unauthenticated Kind = "unauthenticated" // nobody knows who asks
	Busy            Kind = "busy"            // not now: try again
	Gone            Kind = "gone"            // it existed and has ended, like a claim that ran out
	Internal        Kind = "internal"        // our fault
)

// Error is a failure with meaning.
type Error struct {
	Kind    Kind
	Code    string         // stable, for programs: "segment-retired"
	Message string         // what happened, a sentence without its full stop
	Next    string         // what to do now, likewise; may be empty
	Field   string         // the part of the request that is wrong; may be empty
	Data    map[string]any // particulars for programs; ids as text
	Err     error          // the cause, for the log
}

// New makes an error.
func New(kind Kind, code, message string) *Error {
	return &Error{Kind: kind, Code: code, Message: message}
}

// Newf makes an error with a formatted message.
func Newf(kind Kind, code, format string, args ...any) *Error {
	return New(kind, code, fmt.Sprintf(format, args...))
}

// WithNext says what the person can do now.
func (e *Error) WithNext(next string) *Error {
	c := *e
	c.Next = next
	return &c
}

// WithField names the part of the request that is wrong.
func (e *Error) WithField(field string) *Error {
	c := *e
	c.Field = field
	return &c
}

// WithData adds a particular for programs.
func (e *Error) WithData(name string, value any) *Error {
	c := *e
	c.Data = make(map[string]any, len(e.Data)+1)
	for k, v := range e.Data {
		c.Data[k] = v
	}
	c.Data[name] = value
	return &c
}

// Wrap keeps a cause for the log.
func (e *Error) Wrap(cause error) *Error {
	c := *e
	c.Err = cause
	return &c
}

// Error is the message, what to do next, and the cause: all of it, for logs.
func (e *Error) Error() string {
	s := e.Message
	if e.Next != "" {
		s += "; " + e.Next
	}
	if e.Err != nil {
		s += ": " + e.Err.Error()
	}
	return s
}

// Unwrap gives the cause.
func (e *Error) Unwrap() error { return e.Err }

// Is makes errors.Is compare kind and code, so that a bare New(kind, code, "") serves as a pattern.
func (e *Error) Is(target error) bool {
	t, ok := target.(*Error)
	return ok && t.Kind == e.Kind && t.Code == e.Code
}

// As finds the outermost Error in a chain.
func As(err error) (*Error, bool) {
	var e *Error
	ok := errors.As(err, &e)
	return e, ok
}

// KindOf tells an error's kind: "" for nil, Internal when nothing in the chain says otherwise.
func KindOf(err error) Kind {
	if err == nil {
		return ""
	}
	if e, ok := As(err); ok {
		return e.Kind
	}
	return Internal
}

// CodeOf tells an error's code, "" when nothing in the chain has one.
func CodeOf(err error) string {
	if e, ok := As(err); ok {
		return e.Code
	}
	return ""
}
