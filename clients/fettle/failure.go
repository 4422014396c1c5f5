package fettle

import (
	"encoding/json"
	"net/http"

	"fettle.example/fettle/internal/fault"
)

// Failure is the fault that a response tells of: the kind from its status, the rest from its problem details (RFC 9457).
// Unknown members are kept as data, and an answer that is no problem at all says so.
func Failure(resp *http.Response, body []byte) error {
	kind := kindOf(resp.StatusCode)
	var members map[string]any
	if err := json.Unmarshal(body, &members); err != nil || members["code"] == nil {
		return fault.Newf(kind, "answer-unexpected", "the server answered %s", resp.Status).
			WithNext("check the address: is this a fettled server?")
	}
	text := func(name string) string { s, _ := members[name].(string); return s }
	message := text("detail")
	if message == "" {
		message = text("title")
	}
	f := fault.New(kind, text("code"), message).WithNext(text("next_step")).WithField(text("field"))
	if kind == fault.Conflict && f.Code == "segment-retired" {
		f.Kind = fault.Retired
	}
	for _, known := range []string{"type", "title", "status", "detail", "instance", "code", "next_step", "field"} {
		delete(members, known)
	}
	f.Data = members
	return f
}

// kindOf is the inverse of the server's table.
func kindOf(status int) fault.Kind {
	switch status {
	case http.StatusBadRequest, http.StatusUnprocessableEntity, http.StatusRequestEntityTooLarge, http.StatusMethodNotAllowed, http.StatusUnsupportedMediaType:
		return fault.Invalid
	case http.StatusUnauthorized:
		return fault.Unauthenticated
	case http.StatusForbidden:
		return fault.Forbidden
	case http.StatusNotFound:
		return fault.NotFound
	case http.StatusConflict:
		return fault.Conflict
	case http.StatusGone:
		return fault.Gone
	case http.StatusServiceUnavailable, http.StatusTooManyRequests:
		return fault.Busy
	}
	return fault.Internal
}
