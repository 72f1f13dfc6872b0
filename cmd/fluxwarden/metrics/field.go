package metrics

import (
	"sync"
	"time"

	"github.com/prometheus/client_golang/prometheus"

	"fluxwarden/ingest/broker"
)

// A Field counts what happens at the ways in, before the gate.
type Field struct {
	turnedAway         *prometheus.CounterVec
	certificateExpires prometheus.Gauge

	clock      *prometheus.GaugeVec
	clocksLock sync.Mutex
	clocks     map[string]*clockWindow
	now        func() time.Time

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
	f.clock = m.gaugeVec("station", "clock_ahead_seconds", "How far the station's stamps are ahead of their receipt: the most within the last ten to twenty minutes, which the delay of its way touches least. A station that sends live and is behind by more than its interval has a wrong clock or a slow link.", "station")
	f.clocks, f.now = map[string]*clockWindow{}, time.Now
	f.edgeJoined = m.gauge("edge", "joined", "On an edge: 1 while the link to the hub stands.")
	f.edgeUnsent = m.gauge("edge", "unsent_entries", "On an edge: entries of the journal that the hub has not got.")
	f.edgeShare = m.gauge("edge", "journal_share", "On an edge: share of the journal's bound that is taken while the hub has not got all; at 1, readings are refused.")
	f.fromEdge = m.counterVec("hub", "edge_entries_total", "On a hub: journal entries taken from an edge.", "edge")
	f.edgeLag = m.gaugeVec("hub", "edge_lag_seconds", "On a hub: age of the entry that was taken last from an edge, when it was taken.", "edge")
	return f
}

// A clockWindow keeps the most that stamps were ahead of their receipt, in this span of time and in the one before.
type clockWindow struct {
	from       time.Time
	this, last float64
	some, both bool
}

const clockSpan = 10 * time.Minute

// Clock is told of a payload's newest stamp against its receipt.
func (f *Field) Clock(station string, ahead time.Duration) {
	f.clocksLock.Lock()
	defer f.clocksLock.Unlock()
	w := f.clocks[station]
	if w == nil {
		w = &clockWindow{from: f.now()}
		f.clocks[station] = w
	}
	if since := f.now().Sub(w.from); since > clockSpan {
		w.last, w.both = w.this, w.some && since < 2*clockSpan
		w.from, w.some = f.now(), false
	}
	if x := ahead.Seconds(); !w.some || x > w.this {
		w.this, w.some = x, true
	}
	f.clock.WithLabelValues(station).Set(w.most())
}

func (w *clockWindow) most() float64 {
	if w.both {
		return max(w.this, w.last)
	}
	return w.this
}

// ClockAhead is the last of what the metric shows of a station; false where nothing came from it yet.
func (f *Field) ClockAhead(station string) (seconds float64, ok bool) {
	f.clocksLock.Lock()
	defer f.clocksLock.Unlock()
	w := f.clocks[station]
	if w == nil {
		return 0, false
	}
	return w.most(), true
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
