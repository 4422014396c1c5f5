package api

import (
	"context"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/tasks"
)

// ListTasks lists tasks.
func (s *Server) ListTasks(ctx context.Context, r ListTasksRequestObject) (ListTasksResponseObject, error) {
	q := r.Params
	f := tasks.Filter{State: string(value(q.State)), Kind: string(value(q.Kind)), Family: value(q.Family), AssignedTo: value(q.AssignedTo),
		Person: value(q.Person), Cursor: value(q.Cursor), Limit: pageSize(q.Limit)}
	if q.Segment != nil {
		var id ledger.ID
		var err error
		if id, err = readID(*q.Segment, "segment"); err != nil {
			return nil, err
		}
		f.Segment = &id
	}
	list, next, err := s.Queue.List(ctx, r.Volume, f)
	return ListTasks200JSONResponse{Items: each(list, toTask), Next: some(next)}, err
}

// GetTask tells one task with its history.
func (s *Server) GetTask(ctx context.Context, r GetTaskRequestObject) (GetTaskResponseObject, error) {
	t, err := s.Queue.Get(ctx, r.Volume, r.Number)
	if err != nil {
		return nil, err
	}
	history, err := s.Queue.History(ctx, r.Volume, r.Number)
	if err != nil {
		return nil, err
	}
	out := toTask(t)
	events := each(history, func(e tasks.Event) TaskEvent {
		return TaskEvent{At: e.At, Person: some(e.Person), What: e.What, Note: some(e.Note)}
	})
	out.Events = &events
	return GetTask200JSONResponse(out), nil
}

// ListReviews lists what waits for the caller's review.
func (s *Server) ListReviews(ctx context.Context, r ListReviewsRequestObject) (ListReviewsResponseObject, error) {
	list, err := s.Queue.ToReview(ctx, r.Volume, caller(ctx), pageSize(r.Params.Limit))
	return ListReviews200JSONResponse{Items: each(list, toTask)}, err
}

// ReviewTask accepts or returns.
func (s *Server) ReviewTask(ctx context.Context, r ReviewTaskRequestObject) (ReviewTaskResponseObject, error) {
	t, e, err := s.Queue.Review(ctx, r.Volume, r.Number, caller(ctx), string(r.Body.Verdict), value(r.Body.Note))
	return ReviewTask200JSONResponse(toDone(t, e)), err
}
