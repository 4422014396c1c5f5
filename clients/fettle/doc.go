// Package fettle is the Go client of the API, generated from api/openapi.yaml, and what turns a failure back into the value
// that the server had.
//
// It is light: importable by others without the server or the database.
package fettle

//go:generate go tool -modfile=../../tools/go.mod oapi-codegen --config oapi.yaml ../../api/openapi.yaml
