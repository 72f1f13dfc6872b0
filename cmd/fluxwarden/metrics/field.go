package metrics

import (
	"time"

	"github.com/prometheus/client_golang/prometheus"

	"fluxwarden/ingest/broker"
)

// A Field counts what happens at the ways in, before the gate.
type Field struct {
	turnedAway         *prometheus.CounterVec
	certificateExpires prometheus.Gauge
}

// NewField registers the series of the ways in.
func (m *Metrics) NewField() *Field {
	f := &Field{
		turnedAway: m.counterVec("access", "refused_total", "Senders and connections turned away, by way in and reason.", "way", "reason"),
		certificateExpires: m.gauge("access", "certificate_expires_timestamp_seconds",
			"When the certificate of the listeners for readings expires; 0 without TLS."),
	}
	for _, w := range []string{"nats", "http", "mqtt"} {
		for _, r := range broker.RefusedReasons {
			f.turnedAway.WithLabelValues(w, r)
		}
	}
	return f
}

// TurnedAway counts one that was turned away.
func (f *Field) TurnedAway(way, reason string) { f.turnedAway.WithLabelValues(way, reason).Inc() }

// CertificateExpires says when the certificate in use ends.
func (f *Field) CertificateExpires(at time.Time) { f.certificateExpires.Set(float64(at.Unix())) }
