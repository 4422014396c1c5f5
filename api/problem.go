package api

import (
	"errors"
	"maps"
	"net/http"

	"github.com/labstack/echo/v4"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/internal/pg"
)

// statusOf is the one table from kinds of failure to HTTP. clients/fettle/failure.go is its inverse.
var statusOf = map[fault.Kind]int{
	fault.Invalid:         http.StatusBadRequest,
	fault.Unauthenticated: http.StatusUnauthorized,
	fault.Forbidden:       http.StatusForbidden,
	fault.NotFound:        http.StatusNotFound,
	fault.Retired:         http.StatusConflict,
	fault.Conflict:        http.StatusConflict,
	fault.Gone:            http.StatusGone,
	fault.Busy:            http.StatusServiceUnavailable,
	fault.Internal:        http.StatusInternalServerError,
}

// statusOfCode are the few for which HTTP has a status of its own.
var statusOfCode = map[string]int{
	"method-unknown": http.StatusMethodNotAllowed,
	"request-large":  http.StatusRequestEntityTooLarge,
}

// titleOf says what all failures of a kind have in common.
var titleOf = map[fault.Kind]string{
	fault.Invalid:         "The request is not understood",
	fault.Unauthenticated: "Nobody knows who asks",
	fault.Forbidden:       "This person may not do that",
	fault.NotFound:        "It does not exist",
	fault.Retired:         "The segments have changed since",
	fault.Conflict:        "It does not fit the present state",
	fault.Gone:            "It has ended",
	fault.Busy:            "Not now",
	fault.Internal:        "The server failed",
}

// problemType is where a code's meaning would be documented; RFC 9457 asks for a URI, not for a page.
const problemType = "https://fettle.example/problems/"

const retryAfterSeconds = "1"

// problem answers a failure as RFC 9457 problem details. What is not a fault is "internal": its cause is in the log alone.
func (s *Server) problem(err error, c echo.Context) {
	if c.Response().Committed {
		return
	}
	f := asFault(err)
	status, special := statusOfCode[f.Code]
	if !special {
		status = statusOf[f.Kind]
	}
	body := map[string]any{}
	maps.Copy(body, f.Data)
	for member, value := range map[string]string{
		"detail": f.Message, "next_step": f.Next, "field": f.Field, "instance": c.Request().URL.Path,
	} {
		if value != "" {
			body[member] = value
		}
	}
	body["type"], body["title"], body["status"], body["code"] = problemType+f.Code, titleOf[f.Kind], status, f.Code
	if f.Kind == fault.Internal {
		body["detail"] = "something went wrong here; the operator finds request " + c.Response().Header().Get(echo.HeaderXRequestID) + " in the log"
	}
	h := c.Response().Header()
	switch f.Kind {
	case fault.Busy:
		h.Set(echo.HeaderRetryAfter, retryAfterSeconds)
	case fault.Unauthenticated:
		h.Set(echo.HeaderWWWAuthenticate, "Bearer")
	}
	h.Set(echo.HeaderContentType, "application/problem+json")
	if c.Request().Method == http.MethodHead {
		_ = c.NoContent(status)
		return
	}
	if err := c.JSON(status, body); err != nil {
		s.Log.Warn("an answer could not be sent", "error", err)
	}
}

// notText is PostgreSQL's code for text that it can't hold (character_not_in_repertoire).
const notText = "22021"

// asFault finds the fault in an error, or makes one of what echo and the generated code refuse.
func asFault(err error) *fault.Error {
	if f, ok := fault.As(err); ok {
		return f
	}
	if pg.Code(err) == notText {
		return fault.New(fault.Invalid, "text-malformed", "the request holds text that is not UTF-8, or a zero byte").WithNext("send plain text").Wrap(err)
	}
	var h *echo.HTTPError
	if !errors.As(err, &h) {
		return fault.New(fault.Internal, "internal", "the server failed").Wrap(err)
	}
	switch h.Code {
	case http.StatusNotFound:
		return fault.New(fault.NotFound, "path-unknown", "there is nothing at this path").WithNext("see /v1/openapi.json")
	case http.StatusMethodNotAllowed:
		return methodUnknown()
	case http.StatusRequestEntityTooLarge:
		return fault.New(fault.Invalid, "request-large", "the request is larger than "+bodyMost+"B").WithNext("send it in parts")
	}
	if h.Code < http.StatusInternalServerError {
		return fault.New(fault.Invalid, "request-malformed", "the request is not understood").WithNext("see /v1/openapi.json").Wrap(err)
	}
	return fault.New(fault.Internal, "internal", "the server failed").Wrap(err)
}

func methodUnknown() *fault.Error {
	return fault.New(fault.Invalid, "method-unknown", "this path does not take that method").WithNext("see /v1/openapi.json")
}
