// Package house holds the rules of the whole tree as tests: which room may use which, one package comment each, and
// what no test may do. It has no code of its own, and checks text and imports only; what rooms promise each other is
// left to their own tests.
package house
