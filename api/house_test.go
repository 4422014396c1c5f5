package api_test

import (
	"bytes"
	"context"
	"encoding/json"
	"io"
	"net/http"
	"net/http/httptest"
	"strings"
	"sync"
	"testing"

	"github.com/getkin/kin-openapi/openapi3"
	"github.com/getkin/kin-openapi/openapi3filter"
	"github.com/getkin/kin-openapi/routers"
	"github.com/getkin/kin-openapi/routers/gorillamux"
	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgxpool"

	"fettle.example/fettle/api"
	"fettle.example/fettle/internal/synth"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/ledger/ledgertest"
	"fettle.example/fettle/tasks"
	"fettle.example/fettle/triage"
)

// house is a server on a database of its own, with a triaged volume and a team; every answer is held against the contract.
type house struct {
	*testing.T
	url    string
	doc    *openapi3.T
	router routers.Router
	volume *ledger.Volume
	queue  *tasks.Queue
	pool   *pgxpool.Pool // as the application connects
	owner  *pgxpool.Pool // as whoever migrates does
	people *tasks.People

	mu     sync.Mutex
	tokens map[string]string // by handle
	seen   map[string]bool   // operations that have answered
}

// team is who works here; nobody is somebody with a token and no role: an auditor.
var team = map[string][]tasks.Role{
	"rowan": {tasks.Lead}, "alder": {tasks.Proofreader}, "birch": {tasks.Proofreader, tasks.Reviewer}, "agent-1": {tasks.Agent}, "nobody": {},
}

// supervoxels is how many the volume has.
const supervoxels = 200

func newHouse(t *testing.T) *house {
	t.Helper()
	dir := t.TempDir()
	if _, err := synth.WriteTiny(dir, 5, supervoxels); err != nil {
		t.Fatal(err)
	}
	_, owner := ledgertest.New(t)
	name := ledgertest.Import(t, owner, dir)
	pool := ledgertest.AsApplication(t, owner) // so that it is known to be enough
	led := ledger.New(pool)
	h := &house{T: t, pool: pool, owner: owner, tokens: make(map[string]string), seen: make(map[string]bool)}
	h.volume = ledgertest.Open(t, led, name)
	h.people, h.queue = tasks.NewPeople(pool), tasks.NewQueue(led, pool)
	for handle, roles := range team {
		if _, err := h.people.Add(t.Context(), tasks.Operator, handle, roles); err != nil {
			t.Fatal(err)
		}
		secret, _, err := h.people.IssueToken(t.Context(), tasks.Operator, handle, "test")
		if err != nil {
			t.Fatal(err)
		}
		h.tokens[handle] = secret
	}
	if err := triage.Full(t.Context(), h.volume, nil); err != nil {
		t.Fatal(err)
	}
	h.follow()
	server := httptest.NewServer(api.New(api.Config{Pool: pool, Ledger: led, People: h.people, Queue: h.queue}).Handler())
	t.Cleanup(server.Close)
	h.url = server.URL
	h.readContract()
	return h
}

// follow does what the worker would.
func (h *house) follow() {
	h.Helper()
	if _, err := triage.Follow(h.Context(), h.volume); err != nil {
		h.Fatal(err)
	}
	if _, err := h.queue.Follow(h.Context(), h.volume); err != nil {
		h.Fatal(err)
	}
}

// readContract takes the document as the server serves it.
func (h *house) readContract() {
	h.Helper()
	resp, err := http.Get(h.url + "/v1/openapi.json")
	if err != nil {
		h.Fatal(err)
	}
	defer resp.Body.Close()
	text, err := io.ReadAll(resp.Body)
	if err != nil {
		h.Fatal(err)
	}
	if h.doc, err = openapi3.NewLoader().LoadFromData(text); err != nil {
		h.Fatal(err)
	}
	if err := h.doc.Validate(context.Background()); err != nil {
		h.Fatalf("the contract is no OpenAPI document: %v", err)
	}
	if h.router, err = gorillamux.NewRouter(h.doc); err != nil {
		h.Fatal(err)
	}
}

// answer is a response, read.
type answer struct {
	status int
	body   []byte
	header http.Header
}

// ask sends a request in somebody's name ("" is a stranger) and holds the answer against the contract. Paths are below the volume
// unless they begin with /v1.
func (h *house) ask(who, method, path string, body any, headers ...string) answer {
	h.Helper()
	if !strings.HasPrefix(path, "/v1") {
		path = "/v1/volumes/" + h.volume.Name() + path
	}
	var payload []byte
	if body != nil {
		var err error
		if payload, err = json.Marshal(body); err != nil {
			h.Fatal(err)
		}
	}
	req, err := http.NewRequest(method, h.url+path, bytes.NewReader(payload))
	if err != nil {
		h.Fatal(err)
	}
	req.Header.Set("Content-Type", "application/json")
	if who != "" {
		req.Header.Set("Authorization", "Bearer "+h.tokens[who])
	}
	for i := 0; i+1 < len(headers); i += 2 {
		req.Header.Set(headers[i], headers[i+1])
	}
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		h.Fatal(err)
	}
	defer resp.Body.Close()
	text, err := io.ReadAll(resp.Body)
	if err != nil {
		h.Fatal(err)
	}
	h.hold(req, resp, text)
	return answer{resp.StatusCode, text, resp.Header}
}

// hold checks an answer against the contract.
func (h *house) hold(req *http.Request, resp *http.Response, text []byte) {
	h.Helper()
	route, params, err := h.router.FindRoute(req)
	if err != nil {
		return // not in the contract: the caller looks at the status
	}
	if resp.StatusCode < 300 {
		h.mu.Lock()
		h.seen[route.Operation.OperationID] = true
		h.mu.Unlock()
	}
	err = openapi3filter.ValidateResponse(context.Background(), &openapi3filter.ResponseValidationInput{
		RequestValidationInput: &openapi3filter.RequestValidationInput{Request: req, PathParams: params, Route: route},
		Status:                 resp.StatusCode, Header: resp.Header, Body: io.NopCloser(bytes.NewReader(text)),
		Options: &openapi3filter.Options{IncludeResponseStatus: true},
	})
	if err != nil {
		h.Errorf("%s %s answered %d, which is not as the contract says: %v\n%s", req.Method, req.URL.Path, resp.StatusCode, err, text)
	}
}

// must asks and wants a status.
func (h *house) must(status int, who, method, path string, body any, headers ...string) answer {
	h.Helper()
	a := h.ask(who, method, path, body, headers...)
	if a.status != status {
		h.Fatalf("%s %s as %q: %d, want %d\n%s", method, path, who, a.status, status, a.body)
	}
	return a
}

// refused asks and wants a problem with a code.
func (h *house) refused(status int, code, who, method, path string, body any, headers ...string) map[string]any {
	h.Helper()
	a := h.must(status, who, method, path, body, headers...)
	var p map[string]any
	if err := json.Unmarshal(a.body, &p); err != nil || p["code"] != code || int(p["status"].(float64)) != status {
		h.Fatalf("%s %s: %s, want code %s", method, path, a.body, code)
	}
	if !strings.HasPrefix(a.header.Get("Content-Type"), "application/problem+json") {
		h.Errorf("%s %s: a problem of type %q", method, path, a.header.Get("Content-Type"))
	}
	return p
}

func read[T any](h *house, a answer) T {
	h.Helper()
	var v T
	if err := json.Unmarshal(a.body, &v); err != nil {
		h.Fatalf("%v in %s", err, a.body)
	}
	return v
}

// key is a header with a new idempotency key.
func key() []string { return []string{"Idempotency-Key", uuid.Must(uuid.NewV7()).String()} }
