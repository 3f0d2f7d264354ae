package jobs

import (
	"time"

	"github.com/prometheus/client_golang/prometheus"

	"epitally/db"
)

// Metrics counts what loading does. A nil *Metrics counts nothing.
type Metrics struct {
	sources *prometheus.CounterVec
	dies    prometheus.Counter
	wafers  prometheus.Counter
	lag     prometheus.Histogram
	scan    prometheus.Histogram
	failed  *prometheus.CounterVec
	waiting prometheus.Gauge
}

// NewMetrics makes the metrics of loading and registers them.
func NewMetrics(r prometheus.Registerer) (*Metrics, error) {
	m := &Metrics{
		sources: prometheus.NewCounterVec(prometheus.CounterOpts{Name: "epitally_sources_total", Help: "Sources by what became of them: stored, refused or waiting (left for the next scan)."}, []string{"state"}),
		dies:    prometheus.NewCounter(prometheus.CounterOpts{Name: "epitally_dies_stored_total", Help: "Dies stored."}),
		wafers:  prometheus.NewCounter(prometheus.CounterOpts{Name: "epitally_wafers_stored_total", Help: "Measurements of wafers stored."}),
		lag: prometheus.NewHistogram(prometheus.HistogramOpts{Name: "epitally_source_lag_seconds", Help: "From a file's last change to its dies being on the pages.",
			Buckets: []float64{0.5, 1, 2, 5, 10, 30, 60, 120, 300, 900, 3600, 86400}}),
		scan: prometheus.NewHistogram(prometheus.HistogramOpts{Name: "epitally_scan_seconds", Help: "How long scans of the drop folder took.",
			Buckets: []float64{0.001, 0.01, 0.1, 0.5, 1, 5, 30, 120, 600}}),
		failed:  prometheus.NewCounterVec(prometheus.CounterOpts{Name: "epitally_job_failures_total", Help: "Jobs that ended in an error, by job."}, []string{"job"}),
		waiting: prometheus.NewGauge(prometheus.GaugeOpts{Name: "epitally_sources_waiting", Help: "Files that the last scan left: not settled, or to be tried again."}),
	}
	for _, state := range []string{db.SourceStored, db.SourceRefused, db.SourceWaiting} {
		m.sources.WithLabelValues(state) // 0 from the start, so that a first refusal is a rise
	}
	for _, c := range []prometheus.Collector{m.sources, m.dies, m.wafers, m.lag, m.scan, m.failed, m.waiting} {
		if err := r.Register(c); err != nil {
			return nil, err
		}
	}
	return m, nil
}

// filed counts one source; changedAt is when its file was last changed.
func (m *Metrics) filed(src db.Source, err error, changedAt, now time.Time) {
	if m == nil {
		return
	}
	switch {
	case err == nil:
		m.sources.WithLabelValues(db.SourceStored).Inc()
		m.dies.Add(float64(src.Dies))
		m.wafers.Add(float64(src.Wafers))
		m.lag.Observe(max(0, now.Sub(changedAt).Seconds()))
	case src.State == db.SourceRefused:
		m.sources.WithLabelValues(db.SourceRefused).Inc()
	default:
		m.sources.WithLabelValues(db.SourceWaiting).Inc()
	}
}

func (m *Metrics) scanned(r ScanResult) {
	if m == nil {
		return
	}
	m.scan.Observe(r.Took.Seconds())
	m.waiting.Set(float64(r.Left))
}

func (m *Metrics) jobFailed(job string) {
	if m != nil {
		m.failed.WithLabelValues(job).Inc()
	}
}
