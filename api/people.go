package api

import (
	"context"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/tasks"
)

func toPerson(p tasks.Person) Person {
	return Person{Handle: p.Handle, Roles: each(p.Roles, func(r tasks.Role) Role { return Role(r) }), AddedBy: p.AddedBy, AddedAt: p.AddedAt, Left: p.Left}
}

func toToken(t tasks.Token) Token {
	return Token{Id: t.ID, Handle: t.Handle, Note: t.Note, IssuedBy: t.IssuedBy, IssuedAt: t.IssuedAt, LastUsed: t.LastUsed, Revoked: t.Revoked}
}

func readRoles(roles []Role) []tasks.Role {
	return each(roles, func(r Role) tasks.Role { return tasks.Role(r) })
}

// GetMe says who asks.
func (s *Server) GetMe(ctx context.Context, _ GetMeRequestObject) (GetMeResponseObject, error) {
	return GetMe200JSONResponse(toPerson(caller(ctx))), nil
}

// ListPeople lists everybody.
func (s *Server) ListPeople(ctx context.Context, _ ListPeopleRequestObject) (ListPeopleResponseObject, error) {
	list, err := s.People.List(ctx)
	return ListPeople200JSONResponse{Items: each(list, toPerson)}, err
}

// AddPerson adds somebody.
func (s *Server) AddPerson(ctx context.Context, r AddPersonRequestObject) (AddPersonResponseObject, error) {
	p, err := s.People.Add(ctx, caller(ctx).Handle, r.Body.Handle, readRoles(r.Body.Roles))
	return AddPerson201JSONResponse(toPerson(p)), err
}

// ChangePerson sets roles, or notes that somebody has left.
func (s *Server) ChangePerson(ctx context.Context, r ChangePersonRequestObject) (ChangePersonResponseObject, error) {
	var p tasks.Person
	var err error
	switch {
	case r.Body.Left != nil && r.Body.Roles != nil:
		return nil, fault.New(fault.Invalid, "change-both", "roles and leaving are two changes").WithNext("send one of them")
	case r.Body.Left != nil:
		p, err = s.People.Leave(ctx, caller(ctx).Handle, r.Handle)
	case r.Body.Roles != nil:
		p, err = s.People.SetRoles(ctx, caller(ctx).Handle, r.Handle, readRoles(*r.Body.Roles))
	default:
		return nil, fault.New(fault.Invalid, "change-missing", "nothing is to be changed").WithNext("send roles, or left")
	}
	return ChangePerson200JSONResponse(toPerson(p)), err
}

// ListTokens lists a person's tokens: one's own, or for a lead anybody's.
func (s *Server) ListTokens(ctx context.Context, r ListTokensRequestObject) (ListTokensResponseObject, error) {
	if p := caller(ctx); p.Handle != r.Handle && !p.Is(tasks.Lead) {
		return nil, fault.New(fault.Forbidden, "token-of-another", "these are somebody else's tokens").WithNext("list your own, or ask a lead")
	}
	list, err := s.People.Tokens(ctx, r.Handle)
	return ListTokens200JSONResponse{Items: each(list, toToken)}, err
}

// IssueToken makes a token for oneself, or for a lead for anybody.
func (s *Server) IssueToken(ctx context.Context, r IssueTokenRequestObject) (IssueTokenResponseObject, error) {
	secret, t, err := s.People.IssueToken(ctx, caller(ctx).Handle, r.Handle, value(r.Body.Note))
	return IssueToken201JSONResponse{Secret: secret, Token: toToken(t)}, err
}

// RevokeToken ends a token.
func (s *Server) RevokeToken(ctx context.Context, r RevokeTokenRequestObject) (RevokeTokenResponseObject, error) {
	t, err := s.People.RevokeToken(ctx, caller(ctx).Handle, r.Token)
	return RevokeToken200JSONResponse(toToken(t)), err
}
