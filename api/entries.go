package api

import (
	"context"
	"strconv"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger"
)

// ListEntries lists entries. The cursor is the position of the last one of the page before.
func (s *Server) ListEntries(ctx context.Context, r ListEntriesRequestObject) (ListEntriesResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	q := r.Params
	limit := pageSize(q.Limit)
	f := ledger.Filter{Person: value(q.Person), Kind: string(value(q.Kind)), Task: q.Task, After: value(q.After), Before: value(q.Before),
		Limit: limit + 1, Descending: value(q.Order) == "newest"}
	if q.Cursor != nil {
		p, err := strconv.ParseInt(*q.Cursor, 10, 64)
		if err != nil || p < 1 {
			return nil, badCursor()
		}
		if f.Descending {
			f.Before = p
		} else {
			f.After = p
		}
	}
	list, err := v.Entries(ctx, f)
	if err != nil {
		return nil, err
	}
	var next *string
	if len(list) > limit {
		list = list[:limit]
		at := strconv.FormatInt(list[limit-1].Position, 10)
		next = &at
	}
	out := toEntries(list)
	out.Next = next
	return ListEntries200JSONResponse(out), nil
}

// historyPage is a page of a history, oldest first.
func historyPage(list []ledger.Entry, cursor *string, limit *int) (Entries, error) {
	page, next, err := pageOf(list, func(e ledger.Entry) string { return strconv.FormatInt(e.Position, 10) }, cursor, limit)
	out := toEntries(page)
	out.Next = next
	return out, err
}

func badCursor() error {
	return fault.New(fault.Invalid, "cursor-malformed", "the cursor is not one that a page returned").WithField("cursor").
		WithNext("begin again without a cursor")
}

// GetEntry tells one entry and the text that was hashed.
func (s *Server) GetEntry(ctx context.Context, r GetEntryRequestObject) (GetEntryResponseObject, error) {
	v, err := s.Ledger.Volume(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	e, err := v.Entry(ctx, r.Position)
	if err != nil {
		return nil, err
	}
	out, content := toEntry(e), string(e.Content)
	out.Content = &content
	return GetEntry200JSONResponse(out), nil
}
