package api

import (
	"context"
	"strings"

	"github.com/labstack/echo/v4"

	"fettle.example/fettle/internal/fault"
	"fettle.example/fettle/tasks"
)

// anyone stands for everybody with a token: the work and the ledger are open to all who are known.
var anyone []tasks.Role

// rolesOf says who may do what. Every operation is in it, or nobody may do it. The rooms have rules of their own beside: nobody
// reviews their own work, for instance.
var rolesOf = map[string][]tasks.Role{
	"GetMe": anyone, "ListVolumes": anyone, "GetVolume": anyone, "ListDetectors": anyone,
	"LookUp": anyone, "GetSupervoxel": anyone, "GetNearest": anyone, "GetSegment": anyone, "ListMembers": anyone, "GetSegmentHistory": anyone,
	"ListEntries": anyone, "GetEntry": anyone, "ListNeurons": anyone, "GetNeuron": anyone, "GetNeuronHistory": anyone,
	"ListTasks": anyone, "GetTask": anyone, "ListFindings": anyone, "PreviewMerge": anyone, "PreviewSplit": anyone,
	"GetCheckpoint": anyone, "MakeCheckpoint": anyone, "GetCheckpointKey": anyone, "ProveInclusion": anyone, "ProveConsistency": anyone,
	"GetProvenance": anyone,
	"ExportLedger":  anyone, // who may read the entries may take them along
	"GetThroughput": anyone, // their own; throughput.go keeps everybody else's for leads

	"ClaimTask": {tasks.Proofreader}, "ListClaims": {tasks.Proofreader}, "ExtendClaim": {tasks.Proofreader},
	"ReleaseClaim": {tasks.Proofreader}, "ResolveClaim": {tasks.Proofreader},
	"ListReviews": {tasks.Reviewer, tasks.Lead}, "ReviewTask": {tasks.Reviewer, tasks.Lead},

	"PostMerge": posters, "PostSplit": posters, "PostReversal": {tasks.Lead, tasks.Reviewer, tasks.Agent},
	"AddNeuron": posters,

	"GetQueue":    {tasks.Lead, tasks.Reviewer, tasks.Proofreader},
	"AssignTasks": {tasks.Lead}, "WithdrawTasks": {tasks.Lead}, "GetQuality": {tasks.Lead},
	"ListPeople": {tasks.Lead}, "AddPerson": {tasks.Lead}, "ChangePerson": {tasks.Lead},
	"ListTokens": anyone, "IssueToken": anyone, "RevokeToken": anyone, // one's own; the room keeps others' for leads
}

var posters = []tasks.Role{tasks.Proofreader, tasks.Lead, tasks.Agent}

// allow lets an operation through for those who may do it.
func allow(next StrictHandlerFunc, operation string) StrictHandlerFunc {
	return func(c echo.Context, request any) (any, error) {
		roles, known := rolesOf[operation]
		p := caller(c.Request().Context())
		if !known || roles != nil && !p.Is(roles...) {
			words := make([]string, len(roles))
			for i, r := range roles {
				words[i] = string(r)
			}
			return nil, fault.Newf(fault.Forbidden, "role-missing", "%s can't do this: it takes the role %s", p.Handle, strings.Join(words, " or ")).
				WithNext("ask a lead for the role").WithData("roles", words)
		}
		return next(c, request)
	}
}

type callerKey struct{}

// caller is the person whose token came with the request.
func caller(ctx context.Context) tasks.Person {
	p, _ := ctx.Value(callerKey{}).(tasks.Person)
	return p
}

// authenticate finds out who asks, by the bearer token (RFC 6750).
func (s *Server) authenticate(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) error {
		scheme, secret, ok := strings.Cut(c.Request().Header.Get(echo.HeaderAuthorization), " ")
		if !ok || !strings.EqualFold(scheme, "Bearer") {
			return fault.New(fault.Unauthenticated, "token-missing", "the request came without a token").
				WithNext("send it as Authorization: Bearer …; a lead issues tokens")
		}
		p, err := s.People.Authenticate(c.Request().Context(), strings.TrimSpace(secret))
		if err != nil {
			return err
		}
		c.Set(personKey, p)
		ctx := context.WithValue(c.Request().Context(), callerKey{}, p)
		ctx = context.WithValue(ctx, agentKey{}, agentOf(c.Request().UserAgent()))
		c.SetRequest(c.Request().WithContext(ctx))
		return next(c)
	}
}

type agentKey struct{}

// agent is the program that asks on the person's behalf, as it names itself.
func agent(ctx context.Context) string {
	a, _ := ctx.Value(agentKey{}).(string)
	return a
}

const agentMost = 100 // bytes kept of a program's name

func agentOf(userAgent string) string {
	plain := strings.ToValidUTF8(strings.Map(func(r rune) rune {
		if r < ' ' {
			return -1
		}
		return r
	}, userAgent), "")
	if len(plain) > agentMost {
		plain = strings.ToValidUTF8(plain[:agentMost], "")
	}
	return plain
}
