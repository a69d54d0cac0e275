package api

import (
	"net/http"
	"strconv"
	"sync"

	"github.com/prometheus/client_golang/prometheus"
)

// meters are the numbers the edge keeps of itself.
type meters struct {
	requests *prometheus.CounterVec
	seconds  *prometheus.HistogramVec
	inFlight prometheus.Gauge
	panics   prometheus.Counter
}

func newMeters(reg prometheus.Registerer) *meters {
	m := &meters{
		requests: prometheus.NewCounterVec(prometheus.CounterOpts{
			Name: "lampward_http_requests_total",
			Help: "Requests answered, by route template, method and status code.",
		}, []string{"route", "method", "code"}),
		seconds: prometheus.NewHistogramVec(prometheus.HistogramOpts{
			Name:    "lampward_http_request_duration_seconds",
			Help:    "Time from a request's header to the end of its answer, by route template and method.",
			Buckets: []float64{.001, .0025, .005, .01, .025, .05, .1, .25, .5, 1, 2.5, 5, 10, 30},
		}, []string{"route", "method"}),
		inFlight: prometheus.NewGauge(prometheus.GaugeOpts{
			Name: "lampward_http_requests_in_flight",
			Help: "Requests being answered now.",
		}),
		panics: prometheus.NewCounter(prometheus.CounterOpts{
			Name: "lampward_http_panics_total",
			Help: "Requests that met a fault in a handler.",
		}),
	}
	reg.MustRegister(m.requests, m.seconds, m.inFlight, m.panics)
	return m
}

// meter is what one route counts into.
type meter struct {
	seconds  func() prometheus.Observer // made by the first request, so that what nobody asks for is not listed
	requests *prometheus.CounterVec
}

// of returns the meter of a route; method is one of the table's or "other".
func (m *meters) of(path, method string) meter {
	return meter{
		seconds:  sync.OnceValue(func() prometheus.Observer { return m.seconds.WithLabelValues(path, method) }),
		requests: m.requests.MustCurryWith(prometheus.Labels{"route": path, "method": method}),
	}
}

// knownMethod keeps a stranger's invented methods from becoming labels.
func knownMethod(method string) string {
	switch method {
	case http.MethodGet, http.MethodHead, http.MethodPost, http.MethodPut, http.MethodPatch, http.MethodDelete, http.MethodOptions:
		return method
	}
	return "other"
}

func (m meter) count(status int, seconds float64) {
	m.seconds().Observe(seconds)
	m.requests.WithLabelValues(strconv.Itoa(status)).Inc()
}
