package api

import (
	"encoding/json"
	"errors"
	"io"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/labstack/echo/v4"

	"fettle.example/fettle/internal/fault"
)

// answerTo is what a server answers when a handler ends as this one does. Nothing here reaches the database.
func answerTo(t *testing.T, handler echo.HandlerFunc, body io.Reader) (*http.Response, map[string]any) {
	t.Helper()
	s := New(Config{})
	s.handler.POST("/trial", handler)
	w := httptest.NewRecorder()
	s.Handler().ServeHTTP(w, httptest.NewRequest(http.MethodPost, "/trial", body))
	resp := w.Result()
	var problem map[string]any
	if err := json.NewDecoder(resp.Body).Decode(&problem); err != nil {
		t.Fatal(err)
	}
	if got := resp.Header.Get("Content-Type"); got != "application/problem+json" {
		t.Errorf("a problem of type %q", got)
	}
	return resp, problem
}

// TestKindsOfFailure holds every kind against the status RFC 9110 has for it.
func TestKindsOfFailure(t *testing.T) {
	t.Parallel()
	want := map[fault.Kind]int{
		fault.Invalid: 400, fault.Unauthenticated: 401, fault.Forbidden: 403, fault.NotFound: 404, fault.Retired: 409,
		fault.Conflict: 409, fault.Gone: 410, fault.Busy: 503, fault.Internal: 500,
	}
	if diff := cmp.Diff(want, statusOf); diff != "" {
		t.Error(diff)
	}
	for kind, status := range want {
		f := fault.New(kind, "some-code", "what happened").WithNext("what to do").WithField("where").WithData("extra", "more")
		resp, p := answerTo(t, func(echo.Context) error { return f }, nil)
		detail := "what happened"
		if kind == fault.Internal {
			detail, _ = p["detail"].(string)
			if strings.Contains(detail, "what happened") || !strings.Contains(detail, resp.Header.Get("X-Request-Id")) {
				t.Errorf("a failure of the server tells %q", detail)
			}
		}
		members := map[string]any{
			"type": "https://fettle.example/problems/some-code", "title": titleOf[kind], "status": float64(status), "code": "some-code",
			"detail": detail, "next_step": "what to do", "field": "where", "extra": "more", "instance": "/trial",
		}
		if diff := cmp.Diff(members, p); diff != "" || titleOf[kind] == "" || resp.StatusCode != status {
			t.Errorf("%s: status %d, title %q, %s", kind, resp.StatusCode, titleOf[kind], diff)
		}
		if (resp.Header.Get("Retry-After") != "") != (kind == fault.Busy) {
			t.Errorf("%s: Retry-After %q", kind, resp.Header.Get("Retry-After"))
		}
		if (resp.Header.Get("WWW-Authenticate") != "") != (kind == fault.Unauthenticated) {
			t.Errorf("%s: WWW-Authenticate %q", kind, resp.Header.Get("WWW-Authenticate"))
		}
	}
}

// TestWhatIsNoFault is answered as a failure of the server, and its words stay in the log.
func TestWhatIsNoFault(t *testing.T) {
	t.Parallel()
	for name, handler := range map[string]echo.HandlerFunc{
		"an error": func(echo.Context) error { return errors.New(`relation "secret" does not exist`) },
		"a panic":  func(echo.Context) error { panic("secret") },
	} {
		resp, p := answerTo(t, handler, nil)
		text, err := json.Marshal(p)
		if err != nil || resp.StatusCode != 500 || p["code"] != "internal" || strings.Contains(string(text), "secret") {
			t.Errorf("%s: %d %s %v", name, resp.StatusCode, text, err)
		}
	}
}

func TestARequestTooLarge(t *testing.T) {
	t.Parallel()
	const most = 4 << 20 // bytes: bodyMost
	resp, p := answerTo(t, func(echo.Context) error { return errors.New("it was let through") }, strings.NewReader(strings.Repeat(" ", most+1)))
	if resp.StatusCode != http.StatusRequestEntityTooLarge || p["code"] != "request-large" {
		t.Errorf("%d %v", resp.StatusCode, p)
	}
}
