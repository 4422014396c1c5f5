package cli

import (
	"context"
	"errors"
	"io"
	"net/http"
	"time"

	"github.com/google/uuid"

	"fettle.example/fettle/clients/fettle"
)

// idempotencyHeader names the key by which the server recognises a repeat.
const idempotencyHeader = "Idempotency-Key"

// repeater repeats a request whose connection was lost, where a repeat is harmless: reading, and whatever carries an
// idempotency key.
type repeater struct {
	next  http.RoundTripper
	waits []time.Duration // before each repeat
}

func newRepeater() *repeater {
	return &repeater{next: http.DefaultTransport, waits: []time.Duration{200 * time.Millisecond, time.Second}}
}

// repeatable marks a request that the claim it names makes safe to repeat: the server answers the same again.
func repeatable(claim uuid.UUID) fettle.RequestEditorFn {
	return func(_ context.Context, req *http.Request) error {
		req.Header.Set(idempotencyHeader, claim.String())
		return nil
	}
}

// RoundTrip implements http.RoundTripper.
func (r *repeater) RoundTrip(req *http.Request) (*http.Response, error) {
	harmless := req.Method == http.MethodGet || req.Header.Get(idempotencyHeader) != ""
	for n := 0; ; n++ {
		resp, err := r.next.RoundTrip(req)
		if err == nil || !harmless || n == len(r.waits) || req.Context().Err() != nil {
			return resp, err
		}
		body, again := rewind(req)
		if again != nil {
			return nil, errors.Join(err, again)
		}
		select {
		case <-req.Context().Done():
			return nil, err
		case <-time.After(r.waits[n]):
		}
		req = req.Clone(req.Context())
		req.Body = body
	}
}

// rewind gives the body of a request from its start.
func rewind(req *http.Request) (io.ReadCloser, error) {
	if req.Body == nil || req.Body == http.NoBody {
		return req.Body, nil
	}
	if req.GetBody == nil {
		return nil, errors.New("the request cannot be repeated")
	}
	return req.GetBody()
}
