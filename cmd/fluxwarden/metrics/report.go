package metrics

import (
	"time"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/ingest/gate"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/rules"
)

// Gate gives the view that the gate reports to.
func (m *Metrics) Gate() gate.Meter { return gateView{m} }

type gateView struct{ m *Metrics }

func (g gateView) Received(n int) { g.m.received.Add(float64(n)) }
func (g gateView) Acked(n int)    { g.m.acked.Add(float64(n)) }
func (g gateView) Refused(reason wire.Reason, n int) {
	g.m.refused.WithLabelValues(string(reason)).Add(float64(n))
}
func (g gateView) Retried(reason gate.RetryReason, n int) {
	g.m.retried.WithLabelValues(string(reason)).Add(float64(n))
}
func (g gateView) Unanswered(n int) { g.m.unanswered.Add(float64(n)) }
func (g gateView) Dropped(reason gate.RetryReason, n int) {
	g.m.dropped.WithLabelValues(string(reason)).Add(float64(n))
}
func (g gateView) RefusedNotKept(n int) { g.m.notKept.Add(float64(n)) }
func (g gateView) Flushed(_, bytes int, took time.Duration) {
	g.m.flushBytes.Add(float64(bytes))
	g.m.flushSeconds.Observe(took.Seconds())
}

// Worker gives the view that the worker reports to.
func (m *Metrics) Worker() worker.Meter { return workerView{m} }

type workerView struct{ m *Metrics }

func (w workerView) Readings(_ string, n int)                { w.m.readings.Add(float64(n)) }
func (w workerView) Duplicates(n int)                        { w.m.duplicates.Add(float64(n)) }
func (w workerView) Late(_ string, n int)                    { w.m.late.Add(float64(n)) }
func (w workerView) LastMinute(station string, at time.Time) { w.m.stations.lastMinute(station, at) }
func (w workerView) DayJudgedAgain(string)                   { w.m.judgedAgain.Inc() }
func (w workerView) JournalGap(reason string)                { w.m.gaps.WithLabelValues(reason).Inc() }
func (w workerView) SetAside(reason string, n int) {
	w.m.setAside.WithLabelValues(reason).Add(float64(n))
}
func (w workerView) Failed(operation string) { w.m.Failed(operation) }
func (w workerView) Owned(n int)             { w.m.owned.Set(float64(n)) }
func (w workerView) Noted(n int)             { w.m.notes.Add(float64(n)) }
func (w workerView) Journal(_ worker.StreamState, pending uint64) {
	w.m.pending.Set(float64(pending))
}
func (w workerView) Waiting(b worker.Backlog) {
	w.m.uncommittedSince.Set(seconds(b.UncommittedSince))
	w.m.unsealedDays.Set(float64(b.UnsealedDays))
	w.m.oldestUnsealed.Set(seconds(b.OldestUnsealed))
	w.m.owedDays.Set(float64(b.Owed))
}
func (w workerView) Committed(took time.Duration, rows int, err error) {
	w.m.commitSeconds.Observe(took.Seconds())
	if err != nil {
		w.m.commitFailures.Inc()
		return
	}
	w.m.commitRows.Add(float64(rows))
}

// seconds is a moment as metrics tell it; 0 for the zero time.
func seconds(at time.Time) float64 {
	if at.IsZero() {
		return 0
	}
	return float64(at.Unix())
}

// Failed counts an operation that went wrong.
func (m *Metrics) Failed(operation string) { m.failures.WithLabelValues(operation).Inc() }

// Minutes counts the verdicts and missed tests of judged minutes [from, to), of the primary series.
func (m *Metrics) Minutes(j *engine.Judged, from, to int) {
	for k := range j.Series {
		s := &j.Series[k]
		if !s.Primary {
			continue
		}
		var verdicts [rules.VerdictCount]int
		var missed [rules.TestCount]int
		for i := from; i < to; i++ {
			verdicts[s.Verdict[i]]++
			if s.Missed[i] != 0 {
				for t := range missed {
					if s.Missed[i].Has(rules.Test(t)) {
						missed[t]++
					}
				}
			}
		}
		for v, n := range verdicts {
			if n > 0 {
				m.minutes[s.Quantity][v].Add(float64(n))
			}
		}
		for t, n := range missed {
			if n > 0 {
				m.missed[t].Add(float64(n))
			}
		}
	}
}

// Episodes notes a station's episodes: those that are open have a series.
func (m *Metrics) Episodes(station string, episodes []fault.Episode) {
	m.stations.episodes(station, episodes)
}

// Stations says which stations there are: those that are no more lose their series.
func (m *Metrics) Stations(ids []string) { m.stations.set(ids) }

// Journal notes how full the journal is.
func (m *Metrics) Journal(bytes, limit uint64) {
	m.journalBytes.Set(float64(bytes))
	m.journalMax.Set(float64(limit))
}

// Disk notes how much is free in a directory that the settings name ("archive" or "journal").
func (m *Metrics) Disk(directory string, free, floor uint64) {
	m.diskFree.WithLabelValues(directory).Set(float64(free))
	m.diskFloor.WithLabelValues(directory).Set(float64(floor))
}

// ArchiveSize notes how much a folder of the archive takes.
func (m *Metrics) ArchiveSize(part string, bytes int64) {
	m.archiveSize.WithLabelValues(part).Set(float64(bytes))
}

// Reloaded notes whether a site file was taken.
func (m *Metrics) Reloaded(ok bool, at time.Time) {
	if !ok {
		m.reloadGood.Set(0)
		return
	}
	m.reloadGood.Set(1)
	m.reloadTime.Set(float64(at.Unix()))
}

// Notified counts a message that was delivered.
func (m *Metrics) Notified(way string) { m.notified.WithLabelValues(way).Inc() }

// NotifyFailed counts a try that did not come off; for good where the message is given up.
func (m *Metrics) NotifyFailed(way string, forGood bool) {
	m.notifyFailed.WithLabelValues(way).Inc()
	if forGood {
		m.notifyGivenUp.WithLabelValues(way).Inc()
	}
}

// NotifyWaiting notes how many messages wait.
func (m *Metrics) NotifyWaiting(n int) { m.notifyWaiting.Set(float64(n)) }

// Maintenance says at which stations noted maintenance is under way.
func (m *Metrics) Maintenance(ids []string) { m.stations.setMaintenance(ids) }

// Ready notes whether readings are consumed and can be stored.
func (m *Metrics) Ready(ok bool) {
	if ok {
		m.ready.Set(1)
	} else {
		m.ready.Set(0)
	}
}
