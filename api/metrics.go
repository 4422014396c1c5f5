package api

import (
	"strconv"
	"time"

	"github.com/labstack/echo/v4"
	"github.com/prometheus/client_golang/prometheus"
	"github.com/prometheus/client_golang/prometheus/collectors"
	"github.com/prometheus/client_golang/prometheus/promhttp"

	"fettle.example/fettle/triage"
)

// metrics are the server's own registry. Requests are labelled by route, never by address, so that their number is bounded.
type metrics struct {
	registry *prometheus.Registry
	requests *prometheus.HistogramVec
	head     *prometheus.GaugeVec
	lag      *prometheus.GaugeVec
}

func newMetrics() *metrics {
	m := &metrics{
		registry: prometheus.NewRegistry(),
		requests: prometheus.NewHistogramVec(prometheus.HistogramOpts{
			Name: "fettle_request_seconds", Help: "Time to answer a request.", Buckets: prometheus.ExponentialBuckets(0.001, 2.5, 10),
		}, []string{"method", "route", "status"}),
		head: prometheus.NewGaugeVec(prometheus.GaugeOpts{Name: "fettle_position", Help: "Position of the last entry."}, []string{"volume"}),
		lag: prometheus.NewGaugeVec(prometheus.GaugeOpts{
			Name: "fettle_follower_lag_entries", Help: "Entries that a follower has not read yet.",
		}, []string{"volume", "follower"}),
	}
	m.registry.MustRegister(m.requests, m.head, m.lag, collectors.NewGoCollector(), collectors.NewProcessCollector(collectors.ProcessCollectorOpts{}))
	return m
}

func (m *metrics) observe(method, route string, status int, took time.Duration) {
	if route == "" {
		route = "unknown"
	}
	m.requests.WithLabelValues(method, route, strconv.Itoa(status)).Observe(took.Seconds())
}

// serveMetrics answers a scrape. How far followers are behind is read then, from one short query.
func (s *Server) serveMetrics(c echo.Context) error {
	ctx := c.Request().Context()
	rows, err := s.Pool.Query(ctx, `
		select v.name, h.position, f.name, coalesce(p.position, $1)
		  from head h join volume v using (volume_id)
		 cross join unnest(array['triage', 'tasks']) f (name)
		  left join follower p on p.volume_id = h.volume_id and p.name = f.name`, triage.Nowhere)
	if err != nil {
		return err
	}
	defer rows.Close()
	for rows.Next() {
		var volume, follower string
		var head, at int64
		if err := rows.Scan(&volume, &head, &follower, &at); err != nil {
			return err
		}
		s.metrics.head.WithLabelValues(volume).Set(float64(head))
		s.metrics.lag.WithLabelValues(volume, follower).Set(float64(head - at))
	}
	if err := rows.Err(); err != nil {
		return err
	}
	promhttp.HandlerFor(s.metrics.registry, promhttp.HandlerOpts{}).ServeHTTP(c.Response(), c.Request())
	return nil
}
