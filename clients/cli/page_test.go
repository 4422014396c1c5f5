package cli

import (
	"encoding/json"
	"io"
	"net/http"
	"strings"
	"testing"
)

// pages answers like a server that has so many items, numbered, and gives at most most of them at once.
func pages(total, most int) func(cursor *string, limit *int) (*http.Response, error) {
	return func(cursor *string, limit *int) (*http.Response, error) {
		from := 0
		if cursor != nil {
			if err := json.Unmarshal([]byte(*cursor), &from); err != nil {
				return nil, err
			}
		}
		to := min(from+min(*limit, most), total)
		p := page[int]{Items: []int{}}
		for i := from; i < to; i++ {
			p.Items = append(p.Items, i)
		}
		if to < total {
			next, err := json.Marshal(to)
			if err != nil {
				return nil, err
			}
			p.Next = string(next)
		}
		body, err := json.Marshal(p)
		return &http.Response{StatusCode: http.StatusOK, Body: io.NopCloser(strings.NewReader(string(body)))}, err
	}
}

func TestPagesAreJoined(t *testing.T) {
	for _, c := range []struct{ total, most, limit, want int }{
		{0, 10, 0, 0}, {10, 10, 0, 10}, {11, 10, 0, 11}, {2500, 1000, 0, 2500}, {2500, 1000, 1500, 1500}, {5, 10, 3, 3}, {5, 10, 9, 5},
	} {
		items, err := every[int](c.limit, pages(c.total, c.most))
		if err != nil || len(items) != c.want {
			t.Errorf("%+v: %d items, %v", c, len(items), err)
		}
		for i, n := range items {
			if n != i {
				t.Errorf("%+v: item %d is %d", c, i, n)
				break
			}
		}
	}
}
