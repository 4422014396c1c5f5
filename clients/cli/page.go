package cli

import (
	"net/http"

	"fettle.example/fettle/clients/fettle"
)

// page is a part of a list, and where the next begins.
type page[T any] struct {
	Items []T    `json:"items"`
	Next  string `json:"next"`
}

// listOf reads a list that comes whole.
func listOf[T any](resp *http.Response, err error) ([]T, error) {
	p, err := fettle.Read[page[T]](resp, err)
	return p.Items, err
}

// largestPage is what the server gives at once.
const largestPage = 1000

// every asks for page after page until it has limit items; 0 is all there are.
func every[T any](limit int, next func(cursor *string, limit *int) (*http.Response, error)) ([]T, error) {
	var items []T
	var cursor *string
	for {
		n := largestPage
		if limit > 0 {
			n = min(n, limit-len(items))
		}
		p, err := fettle.Read[page[T]](next(cursor, &n))
		if err != nil {
			return nil, err
		}
		items = append(items, p.Items...)
		if p.Next == "" || limit > 0 && len(items) >= limit {
			return items, nil
		}
		cursor = &p.Next
	}
}

// optional is a query parameter: absent when it is the zero value.
func optional[T comparable](v T) *T {
	var zero T
	if v == zero {
		return nil
	}
	return &v
}

// has is the value behind an optional field, the zero value when it is absent.
func has[T any](p *T) T {
	if p == nil {
		var zero T
		return zero
	}
	return *p
}
