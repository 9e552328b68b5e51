package operate

import (
	"time"

	"github.com/prometheus/client_golang/prometheus"
	"github.com/prometheus/client_golang/prometheus/collectors"
)

// callSeconds are the buckets of times: from well below what an answer takes on
// an idle machine to what a client waits.
var callSeconds = []float64{.0005, .001, .002, .005, .01, .02, .05, .1, .2, .5, 1, 2, 5, 10}

// Metrics counts what a server does. Its methods may be called from any
// goroutine.
type Metrics struct {
	registry *prometheus.Registry

	calls       *prometheus.CounterVec
	seconds     *prometheus.HistogramVec
	refusals    *prometheus.CounterVec
	accepted    prometheus.Counter
	refused     *prometheus.CounterVec
	posteriors  prometheus.Counter
	acknowledge prometheus.Histogram
	skipped     prometheus.Counter
	thinned     prometheus.Counter
	heldBack    *prometheus.CounterVec
}

// NewMetrics makes a set with nothing counted.
func NewMetrics(version string) *Metrics {
	m := &Metrics{
		registry: prometheus.NewRegistry(),
		calls: prometheus.NewCounterVec(prometheus.CounterOpts{
			Name: "leadline_calls_total", Help: "Calls that have ended, by method and gRPC code.",
		}, []string{"method", "code"}),
		seconds: prometheus.NewHistogramVec(prometheus.HistogramOpts{
			Name: "leadline_call_seconds", Help: "Time that calls without a stream took, s.", Buckets: callSeconds,
		}, []string{"method"}),
		refusals: prometheus.NewCounterVec(prometheus.CounterOpts{
			Name: "leadline_call_refusals_total", Help: "Calls that were refused, by reason.",
		}, []string{"reason"}),
		accepted: prometheus.NewCounter(prometheus.CounterOpts{
			Name: "leadline_measurements_accepted_total", Help: "Measurements that were accepted.",
		}),
		refused: prometheus.NewCounterVec(prometheus.CounterOpts{
			Name: "leadline_measurements_refused_total", Help: "Measurements that were refused, by reason.",
		}, []string{"reason"}),
		posteriors: prometheus.NewCounter(prometheus.CounterOpts{
			Name: "leadline_posteriors_total", Help: "Posteriors that were released, revised ones included.",
		}),
		acknowledge: prometheus.NewHistogram(prometheus.HistogramOpts{
			Name: "leadline_acknowledgement_seconds", Help: "Time from when a batch was read to when its receipt was sent, s.", Buckets: callSeconds,
		}),
		skipped: prometheus.NewCounter(prometheus.CounterOpts{
			Name: "leadline_followers_skipped_total", Help: "Posteriors that followers were too slow for.",
		}),
		thinned: prometheus.NewCounter(prometheus.CounterOpts{
			Name: "leadline_posteriors_thinned_total", Help: "Posteriors that streams wanted and were not told, since the server had too much to do.",
		}),
		heldBack: prometheus.NewCounterVec(prometheus.CounterOpts{
			Name: "leadline_held_back_seconds_total", Help: "Time for which batches that came too fast had to wait, s, by limit.",
		}, []string{"limit"}),
	}
	m.registry.MustRegister(m.calls, m.seconds, m.refusals, m.accepted, m.refused, m.posteriors, m.acknowledge, m.skipped, m.thinned, m.heldBack,
		collectors.NewGoCollector(), collectors.NewProcessCollector(collectors.ProcessCollectorOpts{}))
	m.Gauge("leadline_build_info", "Always 1; the label is the version.", prometheus.Labels{"version": version}, func() float64 { return 1 })
	return m
}

// Gauge adds one whose value is asked for when it is scraped. Names and labels
// must be new.
func (m *Metrics) Gauge(name, help string, labels map[string]string, value func() float64) {
	m.registry.MustRegister(prometheus.NewGaugeFunc(prometheus.GaugeOpts{Name: name, Help: help, ConstLabels: labels}, value))
}

// Called counts a call that has ended. reason is empty for one that was not
// refused by a reason of ours.
func (m *Metrics) Called(method, code, reason string, stream bool, took time.Duration) {
	m.calls.WithLabelValues(method, code).Inc()
	if !stream {
		m.seconds.WithLabelValues(method).Observe(took.Seconds())
	}
	if reason != "" {
		m.refusals.WithLabelValues(reason).Inc()
	}
}

// Accepted counts a measurement that was.
func (m *Metrics) Accepted() { m.accepted.Inc() }

// Refused counts a measurement that was, for a reason.
func (m *Metrics) Refused(reason string) { m.refused.WithLabelValues(reason).Inc() }

// Released counts posteriors.
func (m *Metrics) Released(n int) { m.posteriors.Add(float64(n)) }

// Acknowledged notes how long a batch has waited for its receipt.
func (m *Metrics) Acknowledged(took time.Duration) { m.acknowledge.Observe(took.Seconds()) }

// Thinned counts a posterior that a stream wanted and was not told.
func (m *Metrics) Thinned() { m.thinned.Inc() }

// HeldBack counts how long a batch has to wait for a limit.
func (m *Metrics) HeldBack(limit string, wait time.Duration) {
	m.heldBack.WithLabelValues(limit).Add(wait.Seconds())
}

// Skipped counts posteriors that a follower was too slow for.
func (m *Metrics) Skipped(n uint64) { m.skipped.Add(float64(n)) }
