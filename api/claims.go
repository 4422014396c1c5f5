package api

import (
	"context"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/ledger"
	"fettle.example/fettle/tasks"
)

// ListClaims lists what the caller holds.
func (s *Server) ListClaims(ctx context.Context, r ListClaimsRequestObject) (ListClaimsResponseObject, error) {
	list, err := s.Queue.Held(ctx, r.Volume, caller(ctx))
	return ListClaims200JSONResponse{Items: each(list, toTask)}, err
}

// ClaimTask takes a task.
func (s *Server) ClaimTask(ctx context.Context, r ClaimTaskRequestObject) (ClaimTaskResponseObject, error) {
	id, err := readKey(r.Params.IdempotencyKey)
	if err != nil {
		return nil, err
	}
	opt := tasks.ClaimOptions{Task: value(r.Body.Task), ID: id}
	for _, k := range value(r.Body.Kinds) {
		opt.Kinds = append(opt.Kinds, string(k))
	}
	opt.Families = append(opt.Families, value(r.Body.Families)...)
	t, err := s.Queue.Claim(ctx, r.Volume, caller(ctx), opt)
	return ClaimTask201JSONResponse(toTask(t)), err
}

// ExtendClaim begins the lease again.
func (s *Server) ExtendClaim(ctx context.Context, r ExtendClaimRequestObject) (ExtendClaimResponseObject, error) {
	if err := s.Queue.OnVolume(ctx, r.Volume, r.Claim); err != nil {
		return nil, err
	}
	c, err := s.Queue.Extend(ctx, caller(ctx), r.Claim)
	return ExtendClaim200JSONResponse(toClaim(c)), err
}

// ReleaseClaim gives a task back.
func (s *Server) ReleaseClaim(ctx context.Context, r ReleaseClaimRequestObject) (ReleaseClaimResponseObject, error) {
	if err := s.Queue.OnVolume(ctx, r.Volume, r.Claim); err != nil {
		return nil, err
	}
	t, err := s.Queue.Release(ctx, caller(ctx), r.Claim, r.Body.Reason)
	return ReleaseClaim200JSONResponse(toTask(t)), err
}

// ResolveClaim ends a task with an outcome.
func (s *Server) ResolveClaim(ctx context.Context, r ResolveClaimRequestObject) (ResolveClaimResponseObject, error) {
	if err := s.Queue.OnVolume(ctx, r.Volume, r.Claim); err != nil {
		return nil, err
	}
	in := tasks.Resolve{Outcome: string(r.Body.Outcome), Note: value(r.Body.Note)}
	if r.Body.Merge != nil && r.Body.Split != nil {
		return nil, fault.New(fault.Invalid, "correction-both", "a task is corrected by a merge or by a split").WithNext("send one of them")
	}
	if r.Body.Merge != nil || r.Body.Split != nil {
		v, err := s.Ledger.Volume(ctx, r.Volume)
		if err != nil {
			return nil, err
		}
		var d ledger.Draft
		if r.Body.Merge != nil {
			d, err = mergeDraft(ctx, v, *r.Body.Merge)
		} else {
			d, err = splitDraft(ctx, v, *r.Body.Split)
		}
		if err != nil {
			return nil, err
		}
		in.Draft = &d
	}
	t, e, err := s.Queue.Resolve(ctx, caller(ctx), r.Claim, in)
	return ResolveClaim200JSONResponse(toDone(t, e)), err
}
