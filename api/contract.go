package api

import (
	"encoding/json"
	"errors"
	"net/http"
	"strings"

	"github.com/getkin/kin-openapi/openapi3"
	"github.com/getkin/kin-openapi/openapi3filter"
	"github.com/getkin/kin-openapi/routers"
	"github.com/getkin/kin-openapi/routers/gorillamux"
	"github.com/labstack/echo/v4"

	"fettle.example/fettle/internal/fault"
)

// contract is the OpenAPI document, and requests are held against it.
type contract struct {
	text   []byte
	router routers.Router
}

func newContract() (*contract, error) {
	doc, err := GetSpec()
	if err != nil {
		return nil, err
	}
	text, err := json.Marshal(doc)
	if err != nil {
		return nil, err
	}
	router, err := gorillamux.NewRouter(doc)
	return &contract{text, router}, err
}

func (k *contract) serve(c echo.Context) error {
	return c.Blob(http.StatusOK, echo.MIMEApplicationJSON, k.text)
}

// check refuses a request that is not in the contract, and says which part of it.
func (k *contract) check(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) error {
		r := c.Request()
		route, params, err := k.router.FindRoute(r)
		if errors.Is(err, routers.ErrMethodNotAllowed) {
			return methodUnknown()
		}
		if err != nil {
			return next(c) // echo says what is wrong with the path
		}
		if err := knownQuery(route, r); err != nil {
			return err
		}
		err = openapi3filter.ValidateRequest(r.Context(), &openapi3filter.RequestValidationInput{
			Request: r, PathParams: params, Route: route,
			Options: &openapi3filter.Options{AuthenticationFunc: openapi3filter.NoopAuthenticationFunc},
		})
		if err != nil {
			return refusal(err)
		}
		return next(c)
	}
}

// knownQuery refuses query parameters that the operation does not have: a mistyped filter must not be taken for none.
func knownQuery(route *routers.Route, r *http.Request) error {
	known := make(map[string]bool)
	for _, list := range []openapi3.Parameters{route.PathItem.Parameters, route.Operation.Parameters} {
		for _, p := range list {
			if p.Value.In == openapi3.ParameterInQuery {
				known[p.Value.Name] = true
			}
		}
	}
	for name := range r.URL.Query() {
		if !known[name] {
			return fault.Newf(fault.Invalid, "parameter-unknown", "there is no parameter %q here", name).WithField(name).WithNext("see /v1/openapi.json")
		}
	}
	return nil
}

// refusal says in a sentence what a request has that the contract has not.
func refusal(err error) error {
	f := fault.New(fault.Invalid, "request-invalid", "the request is not as the contract says").WithNext("see /v1/openapi.json").Wrap(err)
	var e *openapi3filter.RequestError
	if !errors.As(err, &e) {
		return f
	}
	reason := e.Reason
	var schema *openapi3.SchemaError
	if errors.As(e.Err, &schema) {
		reason = schema.Reason
		if path := strings.Join(schema.JSONPointer(), "/"); path != "" {
			f = f.WithField(path)
			reason = path + ": " + reason
		}
	} else if e.Err != nil && reason == "" {
		reason = e.Err.Error()
	}
	if e.Parameter != nil {
		f = f.WithField(e.Parameter.Name)
		reason = e.Parameter.Name + ": " + reason
	}
	if reason != "" {
		f.Message += ": " + reason
	}
	return f
}
