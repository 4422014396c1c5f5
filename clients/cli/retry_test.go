package cli

import (
	"errors"
	"io"
	"net/http"
	"strings"
	"testing"
	"time"
)

// flaky loses the connection some times before it answers.
type flaky struct {
	losses int
	bodies []string
	keys   []string
}

func (f *flaky) RoundTrip(req *http.Request) (*http.Response, error) {
	body, err := io.ReadAll(req.Body)
	if err != nil {
		return nil, err
	}
	f.bodies = append(f.bodies, string(body))
	f.keys = append(f.keys, req.Header.Get(idempotencyHeader))
	if len(f.bodies) <= f.losses {
		return nil, errors.New("connection reset by peer")
	}
	return &http.Response{StatusCode: http.StatusOK, Body: http.NoBody, Request: req}, nil
}

func TestRepeatsCarryTheSameKeyAndBody(t *testing.T) {
	server := &flaky{losses: 2}
	client := http.Client{Transport: &repeater{next: server, waits: []time.Duration{0, 0}}}
	req, err := http.NewRequest(http.MethodPost, "http://fettle.example/", strings.NewReader("merge"))
	if err != nil {
		t.Fatal(err)
	}
	req.Header.Set(idempotencyHeader, "key")
	if _, err := client.Do(req); err != nil {
		t.Fatal(err)
	}
	for i := range server.bodies {
		if server.bodies[i] != "merge" || server.keys[i] != "key" {
			t.Errorf("try %d sent %q with key %q", i+1, server.bodies[i], server.keys[i])
		}
	}
	if len(server.bodies) != 3 {
		t.Errorf("%d tries", len(server.bodies))
	}
}

func TestWithoutAKeyAPostIsSentOnce(t *testing.T) {
	server := &flaky{losses: 1}
	client := http.Client{Transport: &repeater{next: server, waits: []time.Duration{0, 0}}}
	if _, err := client.Post("http://fettle.example/", "text/plain", strings.NewReader("merge")); err == nil {
		t.Error("a lost post was taken for done")
	}
	if len(server.bodies) != 1 {
		t.Errorf("sent %d times", len(server.bodies))
	}
}

func TestRepeatsEnd(t *testing.T) {
	server := &flaky{losses: 10}
	client := http.Client{Transport: &repeater{next: server, waits: []time.Duration{0, 0}}}
	req, err := http.NewRequest(http.MethodGet, "http://fettle.example/", strings.NewReader(""))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := client.Do(req); err == nil {
		t.Error("no answer was taken for one")
	}
	if len(server.bodies) != 3 {
		t.Errorf("%d tries", len(server.bodies))
	}
}
