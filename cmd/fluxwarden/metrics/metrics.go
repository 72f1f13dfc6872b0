// Package metrics is the one registry of the daemon: what the gate, the worker and the archive do, in series whose number is
// bounded whatever the stations send.
package metrics

import (
	"runtime"
	"runtime/debug"
	"time"

	"github.com/prometheus/client_golang/prometheus"
	"github.com/prometheus/client_golang/prometheus/collectors"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/ingest/gate"
	"fluxwarden/ingest/wire"
	"fluxwarden/rules"
)

const namespace = "fluxwarden"

// Operations are all that can fail and is counted by its name.
var Operations = []string{"commit", "lease", "lost_partition", "judge", "publish_findings", "purge_journal", "read_archive", "read_journal", "read_changes", "set_aside",
	"broker", "reload", "disk", "http", "clock", "notify", "credentials", "mqtt", "files", "modbus", "modbus_lost", "edge"}

// NotifyWays are the ways on which the daemon's own messages go out.
var NotifyWays = []string{"webhook", "mail"}

// Metrics is the registry and the handles into it. Its methods may be called by several goroutines.
type Metrics struct {
	Registry *prometheus.Registry

	received, acked, unanswered, notKept prometheus.Counter
	refused, retried, dropped            *prometheus.CounterVec
	flushSeconds                         prometheus.Histogram
	flushBytes                           prometheus.Counter

	readings, duplicates, late, judgedAgain prometheus.Counter
	setAside, gaps, failures                *prometheus.CounterVec
	commitSeconds                           prometheus.Histogram
	commitRows, commitFailures              prometheus.Counter
	minutes                                 [rules.QuantityCount][rules.VerdictCount]prometheus.Counter
	missed                                  [rules.TestCount]prometheus.Counter
	owned, pending                          prometheus.Gauge
	journalBytes, journalMax                prometheus.Gauge
	diskFree, diskFloor                     *prometheus.GaugeVec
	reloadGood, reloadTime, ready           prometheus.Gauge
	stations                                *stations

	uncommittedSince, unsealedDays, oldestUnsealed prometheus.Gauge
	notified, notifyFailed, notifyGivenUp          *prometheus.CounterVec
	notifyWaiting                                  prometheus.Gauge
	notes                                          prometheus.Counter
	archiveSize                                    *prometheus.GaugeVec
	owedDays                                       prometheus.Gauge
}

// New makes the registry. now is the daemon's clock.
func New(version string, now func() time.Time) *Metrics {
	m := &Metrics{Registry: prometheus.NewRegistry()}
	m.gate()
	m.worker()
	m.archive()
	m.backlog()
	m.notifier()
	m.stations = newStations(now)
	m.Registry.MustRegister(m.stations, collectors.NewGoCollector(), collectors.NewProcessCollector(collectors.ProcessCollectorOpts{}))
	revision := ""
	if info, ok := debug.ReadBuildInfo(); ok {
		for _, s := range info.Settings {
			if s.Key == "vcs.revision" {
				revision = s.Value
			}
		}
	}
	build := m.gaugeVec("", "build_info", "Always 1; the labels say what is running.", "version", "revision", "goversion")
	build.WithLabelValues(version, revision, runtime.Version()).Set(1)
	return m
}

func (m *Metrics) gate() {
	m.received = m.counter("gate", "readings_received_total", "Sound readings that senders have brought.")
	m.acked = m.counter("gate", "readings_acked_total", "Readings whose senders were told that they are on disk.")
	m.unanswered = m.counter("gate", "unanswered_messages_total", "Payloads that came without asking for an answer.")
	m.notKept = m.counter("gate", "refused_not_kept_total", "Refused payloads over the bound of what REFUSED keeps of a station.")
	m.refused = m.counterVec("gate", "refused_readings_total", "Readings refused, by reason; a payload refused whole counts as one.", "reason")
	for _, r := range wire.Reasons {
		m.refused.WithLabelValues(string(r))
	}
	m.retried = m.counterVec("gate", "retried_messages_total", "Payloads whose senders were told to come again, by reason.", "reason")
	m.dropped = m.counterVec("gate", "dropped_messages_total", "Payloads that nobody waited for an answer to and that could not be stored, by reason.", "reason")
	for _, r := range gate.RetryReasons {
		m.retried.WithLabelValues(string(r))
		m.dropped.WithLabelValues(string(r))
	}
	m.flushSeconds = m.histogram("gate", "flush_duration_seconds", "Time from taking a group of readings to the broker's word that it is on disk.",
		prometheus.ExponentialBuckets(0.0005, 2, 14))
	m.flushBytes = m.counter("gate", "flushed_bytes_total", "Bytes written to the journal.")
}

func (m *Metrics) worker() {
	m.readings = m.counter("worker", "readings_total", "Readings taken from the journal, repeats included.")
	m.duplicates = m.counter("worker", "duplicates_total", "Values that were known already and dropped.")
	m.late = m.counter("worker", "late_readings_total", "Readings that came after their minute was judged.")
	m.judgedAgain = m.counter("worker", "rejudged_total", "Station-days judged again, for late readings, for an episode that reaches back, or for their seal.")
	m.setAside = m.counterVec("worker", "set_aside_readings_total", "Readings that could not be judged and lie in REFUSED, by reason.", "reason")
	for _, r := range []string{worker.ReasonPanic, worker.ReasonUnreadable, worker.ReasonNote} {
		m.setAside.WithLabelValues(r)
	}
	m.gaps = m.counterVec("journal", "gaps_total", "Times that the journal was not what was read before, by reason.", "reason")
	for _, r := range []string{worker.GapPurged, worker.GapRecreate, worker.GapReused} {
		m.gaps.WithLabelValues(r)
	}
	m.owned = m.gauge("worker", "partitions", "Partitions worked on, of 64.")
	m.pending = m.gauge("journal", "pending_messages", "Messages of the journal not yet read.")
	m.journalBytes = m.gauge("journal", "size_bytes", "Bytes in the journal.")
	m.journalMax = m.gauge("journal", "limit_bytes", "Bytes that the journal may take; full, it refuses new readings.")
	minutes := m.counterVec("worker", "verdicts_total", "Verdicts on minutes as they came about, by quantity.", "quantity", "verdict")
	for q := range rules.Quantity(rules.QuantityCount) {
		for v := range rules.Verdict(rules.VerdictCount) {
			m.minutes[q][v] = minutes.WithLabelValues(q.String(), v.String())
		}
	}
	missed := m.counterVec("worker", "tests_missed_total", "Tests missed in minutes as they came about, by test.", "test")
	for t := range rules.Test(rules.TestCount) {
		m.missed[t] = missed.WithLabelValues(t.String())
	}
	m.failures = m.counterVec("", "failures_total", "What went wrong, by operation.", "operation")
	for _, o := range Operations {
		m.failures.WithLabelValues(o)
	}
}

func (m *Metrics) archive() {
	m.commitSeconds = m.histogram("commit", "duration_seconds", "Time that a partition's commit took.", prometheus.ExponentialBuckets(0.004, 2, 14))
	m.commitRows = m.counter("commit", "readings_total", "Readings committed to the archive.")
	m.commitFailures = m.counter("commit", "failures_total", "Commits that did not come off; they are tried again.")
	m.archiveSize = m.gaugeVec("archive", "size_bytes", "Bytes that the archive takes, by folder; superseded holds the replaced revisions.", "folder")
	m.diskFree = m.gaugeVec("disk", "free_bytes", "Bytes free where the directory lies.", "directory")
	m.diskFloor = m.gaugeVec("disk", "floor_bytes", "Bytes that must stay free: below it no reading is taken.", "directory")
	m.reloadGood = m.gauge("rules", "last_reload_successful", "1 if the last site file that was read is in force or will be from the next UTC day; 0 if it was refused.")
	m.reloadTime = m.gauge("rules", "last_reload_success_timestamp_seconds", "When a site file was last taken.")
	m.ready = m.gauge("", "ready", "1 while readings are consumed and can be stored.")
}

func (m *Metrics) backlog() {
	m.uncommittedSince = m.gauge("commit", "waiting_since_timestamp_seconds", "Last commit of the partition whose readings have waited longest for the next one; 0 while none waits.")
	m.notes = m.counter("worker", "notes_total", "Notes that the daemon was given and took.")
	m.owedDays = m.gauge("worker", "owed", "Station-days that late readings, a note or a fault found later make to be judged once more; they are, beside the readings.")
	m.unsealedDays = m.gauge("seal", "waiting", "Station-days that are not sealed yet.")
	m.oldestUnsealed = m.gauge("seal", "oldest_waiting_timestamp_seconds", "Begin of the oldest station-day that is not sealed; 0 while there is none.")
}

func (m *Metrics) notifier() {
	m.notified = m.counterVec("notify", "messages_total", "Messages delivered, by way.", "way")
	m.notifyFailed = m.counterVec("notify", "failures_total", "Tries to deliver a message that did not come off, by way.", "way")
	m.notifyGivenUp = m.counterVec("notify", "given_up_total", "Messages that were not delivered and are no longer tried, by way.", "way")
	for _, way := range NotifyWays {
		m.notified.WithLabelValues(way)
		m.notifyFailed.WithLabelValues(way)
		m.notifyGivenUp.WithLabelValues(way)
	}
	m.notifyWaiting = m.gauge("notify", "waiting_messages", "Messages due that are not delivered yet, those held over quiet hours included.")
}

func (m *Metrics) counter(subsystem, name, help string) prometheus.Counter {
	c := prometheus.NewCounter(prometheus.CounterOpts{Namespace: namespace, Subsystem: subsystem, Name: name, Help: help})
	m.Registry.MustRegister(c)
	return c
}

func (m *Metrics) counterVec(subsystem, name, help string, labels ...string) *prometheus.CounterVec {
	c := prometheus.NewCounterVec(prometheus.CounterOpts{Namespace: namespace, Subsystem: subsystem, Name: name, Help: help}, labels)
	m.Registry.MustRegister(c)
	return c
}

func (m *Metrics) gauge(subsystem, name, help string) prometheus.Gauge {
	g := prometheus.NewGauge(prometheus.GaugeOpts{Namespace: namespace, Subsystem: subsystem, Name: name, Help: help})
	m.Registry.MustRegister(g)
	return g
}

func (m *Metrics) gaugeVec(subsystem, name, help string, labels ...string) *prometheus.GaugeVec {
	g := prometheus.NewGaugeVec(prometheus.GaugeOpts{Namespace: namespace, Subsystem: subsystem, Name: name, Help: help}, labels)
	m.Registry.MustRegister(g)
	return g
}

func (m *Metrics) histogram(subsystem, name, help string, buckets []float64) prometheus.Histogram {
	h := prometheus.NewHistogram(prometheus.HistogramOpts{Namespace: namespace, Subsystem: subsystem, Name: name, Help: help, Buckets: buckets})
	m.Registry.MustRegister(h)
	return h
}
