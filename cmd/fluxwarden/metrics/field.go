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

	edgeJoined, edgeUnsent, edgeShare prometheus.Gauge
	fromEdge                          *prometheus.CounterVec
	edgeLag                           *prometheus.GaugeVec
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
	f.edgeJoined = m.gauge("edge", "joined", "On an edge: 1 while the link to the hub stands.")
	f.edgeUnsent = m.gauge("edge", "unsent_entries", "On an edge: entries of the journal that the hub has not got.")
	f.edgeShare = m.gauge("edge", "journal_share", "On an edge: share of the journal's bound that is taken while the hub has not got all; at 1, readings are refused.")
	f.fromEdge = m.counterVec("hub", "edge_entries_total", "On a hub: journal entries taken from an edge.", "edge")
	f.edgeLag = m.gaugeVec("hub", "edge_lag_seconds", "On a hub: age of the entry that was taken last from an edge, when it was taken.", "edge")
	return f
}

// Edge says how an edge stands to its hub.
func (f *Field) Edge(joined bool, unsent uint64, share float64) {
	f.edgeJoined.Set(0)
	if joined {
		f.edgeJoined.Set(1)
	}
	f.edgeUnsent.Set(float64(unsent))
	f.edgeShare.Set(share)
}

// FromEdge counts entries that a hub has taken.
func (f *Field) FromEdge(edge string, entries int, age time.Duration) {
	f.fromEdge.WithLabelValues(edge).Add(float64(entries))
	f.edgeLag.WithLabelValues(edge).Set(age.Seconds())
}

// TurnedAway counts one that was turned away.
func (f *Field) TurnedAway(way, reason string) { f.turnedAway.WithLabelValues(way, reason).Inc() }

// CertificateExpires says when the certificate in use ends.
func (f *Field) CertificateExpires(at time.Time) { f.certificateExpires.Set(float64(at.Unix())) }
