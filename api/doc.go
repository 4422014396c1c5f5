// Package api serves the rooms over HTTP. openapi.yaml is the contract: the server's interface and the client are generated
// from it, requests are checked against it, and so are the answers in tests.
//
// It promises that every failure is a problem document (RFC 9457) that says what happened and what to do next and never how
// the server is built; that a repeat of a request that posts or claims is harmless, by its Idempotency-Key; and that who may do
// what stands in one table (roles.go).
//
// One file a resource; problem.go is the one table from kinds of failure to status, convert.go turns what the rooms return into
// what the contract says. Rules about segments, tasks and people are in the rooms.
package api

//go:generate go tool -modfile=../tools/go.mod oapi-codegen --config oapi.yaml openapi.yaml
