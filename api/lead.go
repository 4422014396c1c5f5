package api

import (
	"context"
	"time"

	openapi_types "github.com/oapi-codegen/runtime/types"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/tasks"
)

// personalData stands with every figure about people.
const personalData = "Figures about people are personal data. Local rules and agreements decide who may see, keep and use them; " +
	"small numbers say little, which is why intervals stand beside the shares."

// AssignTasks gives tasks to a person.
func (s *Server) AssignTasks(ctx context.Context, r AssignTasksRequestObject) (AssignTasksResponseObject, error) {
	b := r.Body
	if (b.Best == nil) == (b.Tasks == nil) {
		return nil, fault.New(fault.Invalid, "assignment-malformed", "say which tasks: by number, or how many of the best").WithNext("send tasks, or best")
	}
	if b.Tasks != nil {
		n, err := s.Queue.Assign(ctx, r.Volume, caller(ctx), b.To, *b.Tasks)
		return AssignTasks200JSONResponse{Count: n}, err
	}
	numbers, err := s.Queue.AssignBest(ctx, r.Volume, caller(ctx), b.To, b.Best.Count, string(value(b.Best.Kind)), value(b.Best.Family))
	return AssignTasks200JSONResponse{Count: len(numbers), Tasks: &numbers}, err
}

// WithdrawTasks takes assignments back.
func (s *Server) WithdrawTasks(ctx context.Context, r WithdrawTasksRequestObject) (WithdrawTasksResponseObject, error) {
	n, err := s.Queue.Unassign(ctx, r.Volume, caller(ctx), r.Body.Tasks)
	return WithdrawTasks200JSONResponse{Count: n}, err
}

// GetQueue tells where the work stands.
func (s *Server) GetQueue(ctx context.Context, r GetQueueRequestObject) (GetQueueResponseObject, error) {
	q, err := s.Queue.Status(ctx, r.Volume)
	if err != nil {
		return nil, err
	}
	out := GetQueue200JSONResponse{States: q.States, Minutes: q.Minutes, Lag: q.Lag, Notice: personalData}
	out.Open = each(q.Open, func(o tasks.OpenKind) OpenKind {
		return OpenKind{Kind: TaskKind(o.Kind), Family: o.Family, Tasks: o.Tasks, Ready: o.Ready, Assigned: o.Assigned, Minutes: o.Minutes, Gain: o.Gain}
	})
	out.Holders = each(q.Holders, func(h tasks.Holder) Holder {
		return Holder{Person: h.Person, Task: h.Task, Kind: TaskKind(h.Kind), At: h.At, Until: h.Until}
	})
	return out, nil
}

// GetThroughput tells each person's work by day: a person's own, or for a lead everybody's.
func (s *Server) GetThroughput(ctx context.Context, r GetThroughputRequestObject) (GetThroughputResponseObject, error) {
	p := caller(ctx)
	f := tasks.ThroughputFilter{Person: value(r.Params.Person)}
	if !p.Is(tasks.Lead) {
		if f.Person == "" {
			f.Person = p.Handle
		}
		if f.Person != p.Handle {
			return nil, fault.New(fault.Forbidden, "throughput-of-another", "these figures are about somebody else").WithNext("ask for your own, or a lead")
		}
	}
	zone, err := time.LoadLocation(value(r.Params.Zone))
	if err != nil {
		return nil, fault.Newf(fault.Invalid, "zone-unknown", "there is no time zone %q", value(r.Params.Zone)).WithField("zone").WithNext("give an IANA name such as Europe/Madrid, or UTC")
	}
	f.Zone = zone
	midnight := func(d time.Time) time.Time { return time.Date(d.Year(), d.Month(), d.Day(), 0, 0, 0, 0, zone) }
	if r.Params.From != nil {
		f.From = midnight(r.Params.From.Time)
	}
	if r.Params.To != nil {
		f.To = midnight(r.Params.To.Time.AddDate(0, 0, 1))
	}
	list, err := s.Queue.Throughput(ctx, r.Volume, f)
	return GetThroughput200JSONResponse{Items: each(list, toPersonDay), Notice: personalData}, err
}

func toPersonDay(t tasks.Throughput) PersonDay {
	out := PersonDay{Person: t.Person, Day: openapi_types.Date{Time: t.Day}, Resolved: t.Resolved, Corrected: t.Corrected, Sound: t.Sound, Unclear: t.Unclear,
		Released: t.Released, Expired: t.Expired, ActiveHours: t.ActiveHours, TasksPerActiveHour: some(t.PerHour), Reviewed: t.Reviewed, Accepted: t.Accepted, Returned: t.Returned}
	if t.Reviewed > 0 {
		out.AcceptedShare = &Share{Value: t.Share, Low: t.ShareLo, High: t.ShareHi}
	}
	out.Kinds = each(t.Kinds, func(k tasks.KindTime) KindTime {
		kt := KindTime{Kind: TaskKind(k.Kind), Resolved: k.Resolved, Censored: k.Censored}
		if k.Reached {
			kt.MedianMinutes = &k.Median
		}
		return kt
	})
	return out
}
