package api

import (
	"log/slog"
	"net/http"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgxpool"
	"github.com/labstack/echo/v4"
	"github.com/labstack/echo/v4/middleware"

	"fettle.example/fettle/ledger"
	"fettle.example/fettle/tasks"
)

// Config says what to serve.
type Config struct {
	Pool   *pgxpool.Pool
	Ledger *ledger.Ledger
	People *tasks.People
	Queue  *tasks.Queue
	Log    *slog.Logger
}

// Server answers requests. It is safe for concurrent use.
type Server struct {
	Config
	metrics *metrics
	handler *echo.Echo
}

// bodyMost bounds a request: 100,000 ids of 20 digits with quotes and commas.
const bodyMost = "4M"

// New makes a server of the contract. The contract is part of the program: New panics when it is broken.
func New(cfg Config) *Server {
	if cfg.Log == nil {
		cfg.Log = slog.New(slog.DiscardHandler)
	}
	s := &Server{Config: cfg, metrics: newMetrics()}
	contract, err := newContract()
	if err != nil {
		panic("api: the contract in the program is broken: " + err.Error())
	}
	e := echo.New()
	e.HideBanner, e.HidePort = true, true
	e.IPExtractor = echo.ExtractIPDirect()
	e.HTTPErrorHandler = s.problem
	e.Use(s.requestLog(), middleware.RecoverWithConfig(middleware.RecoverConfig{LogErrorFunc: s.panicked}), middleware.BodyLimit(bodyMost))
	e.GET("/healthz", func(c echo.Context) error { return c.String(http.StatusOK, "ok\n") })
	e.GET("/readyz", s.ready)
	e.GET("/metrics", s.serveMetrics)
	e.GET("/v1/openapi.json", contract.serve)
	v1 := e.Group("", s.authenticate, contract.check)
	RegisterHandlers(v1, NewStrictHandler(s, []StrictMiddlewareFunc{allow}))
	s.handler = e
	return s
}

// Handler is the server for net/http.
func (s *Server) Handler() http.Handler { return s.handler }

// requestLog notes each request once, with its route, and counts it.
func (s *Server) requestLog() echo.MiddlewareFunc {
	return middleware.RequestLoggerWithConfig(middleware.RequestLoggerConfig{
		LogLatency: true, LogMethod: true, LogStatus: true, LogRoutePath: true, LogURIPath: true, LogError: true, HandleError: true,
		BeforeNextFunc: func(c echo.Context) {
			id := uuid.NewString()
			c.Set(requestID, id)
			c.Response().Header().Set(echo.HeaderXRequestID, id)
		},
		LogValuesFunc: func(c echo.Context, v middleware.RequestLoggerValues) error {
			s.metrics.observe(v.Method, v.RoutePath, v.Status, v.Latency)
			level := slog.LevelDebug
			if v.Status >= http.StatusInternalServerError {
				level = slog.LevelError
			}
			who := ""
			if p, ok := c.Get(personKey).(tasks.Person); ok {
				who = p.Handle
			}
			s.Log.LogAttrs(c.Request().Context(), level, "request", slog.String("id", c.Get(requestID).(string)), slog.String("method", v.Method),
				slog.String("path", v.URIPath), slog.Int("status", v.Status), slog.Duration("took", v.Latency.Round(time.Microsecond)),
				slog.String("person", who), slog.Any("error", v.Error))
			return nil
		},
	})
}

// Keys of what middleware leaves in an echo context.
const (
	requestID = "request id"
	personKey = "person"
)

func (s *Server) panicked(c echo.Context, err error, stack []byte) error {
	s.Log.Error("panic", "path", c.Request().URL.Path, "error", err, "stack", string(stack))
	return err
}

// ready says whether the database answers.
func (s *Server) ready(c echo.Context) error {
	if err := s.Pool.Ping(c.Request().Context()); err != nil {
		return c.String(http.StatusServiceUnavailable, "the database does not answer\n")
	}
	return c.String(http.StatusOK, "ready\n")
}
