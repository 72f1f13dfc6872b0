package metrics

import (
	"maps"
	"slices"
	"sync"
	"time"

	"github.com/prometheus/client_golang/prometheus"

	"fluxwarden/qc/fault"
)

// faultSeriesMax bounds the series of open faults over all stations: a network-wide event must not fill the memory of those who scrape.
const faultSeriesMax = 3000

// stations is what there is a series of for each station. It is collected when asked for, so that a station or a fault that is gone
// leaves nothing behind.
type stations struct {
	now  func() time.Time
	last *prometheus.Desc
	lag  *prometheus.Desc
	open *prometheus.Desc
	more *prometheus.Desc
	work *prometheus.Desc
	due  *prometheus.Desc

	mu     sync.Mutex
	known  map[string]time.Time // the end of the last judged minute; zero before the first
	faults map[string][]openFault
	atWork []string // stations under noted maintenance
	ends   []calibrationEnd
}

type openFault struct{ instrument, kind, severity string }

func newStations(now func() time.Time) *stations {
	desc := func(name, help string, labels ...string) *prometheus.Desc {
		return prometheus.NewDesc(namespace+"_"+name, help, labels, nil)
	}
	return &stations{now: now, known: map[string]time.Time{}, faults: map[string][]openFault{},
		last: desc("station_last_minute_timestamp_seconds", "End of the last judged minute; 0 before the first.", "station"),
		lag:  desc("station_lag_seconds", "Time since the end of the last judged minute, by the daemon's clock.", "station"),
		open: desc("fault_open", "1 while an episode is open.", "station", "instrument", "fault", "severity"),
		more: desc("faults_not_shown", "Open episodes beyond the bound of what has a series."),
		work: desc("station_maintenance", "1 while noted maintenance is under way.", "station"),
		due:  desc("calibration_due_timestamp_seconds", "When an instrument's calibration ends; only of those that end within two months or have ended.", "station", "instrument")}
}

func (s *stations) set(ids []string) {
	s.mu.Lock()
	defer s.mu.Unlock()
	known := make(map[string]time.Time, len(ids))
	for _, id := range ids {
		known[id] = s.known[id]
	}
	s.known = known
	maps.DeleteFunc(s.faults, func(id string, _ []openFault) bool { _, ok := known[id]; return !ok })
}

func (s *stations) lastMinute(id string, at time.Time) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if old, ok := s.known[id]; ok && at.After(old) {
		s.known[id] = at
	}
}

func (s *stations) episodes(id string, all []fault.Episode) {
	var open []openFault
	for i := range all {
		if e := &all[i]; e.To == fault.Open {
			open = append(open, openFault{e.Instrument, e.Kind.String(), e.Severity.String()})
		}
	}
	slices.SortFunc(open, func(a, b openFault) int {
		return slices.Compare([]string{a.instrument, a.kind, a.severity}, []string{b.instrument, b.kind, b.severity})
	})
	open = slices.Compact(open)
	s.mu.Lock()
	defer s.mu.Unlock()
	if _, ok := s.known[id]; ok && len(open) > 0 {
		s.faults[id] = open
	} else {
		delete(s.faults, id)
	}
}

// Describe implements prometheus.Collector.
func (s *stations) Describe(c chan<- *prometheus.Desc) {
	for _, d := range []*prometheus.Desc{s.last, s.lag, s.open, s.more, s.work, s.due} {
		c <- d
	}
}

// Collect implements prometheus.Collector.
func (s *stations) Collect(c chan<- prometheus.Metric) {
	s.mu.Lock()
	defer s.mu.Unlock()
	now := s.now()
	for id, at := range s.known {
		c <- prometheus.MustNewConstMetric(s.last, prometheus.GaugeValue, seconds(at), id)
		if !at.IsZero() {
			c <- prometheus.MustNewConstMetric(s.lag, prometheus.GaugeValue, now.Sub(at).Seconds(), id)
		}
	}
	shown, hidden := 0, 0
	for _, id := range slices.Sorted(maps.Keys(s.faults)) {
		for _, f := range s.faults[id] {
			if shown == faultSeriesMax {
				hidden++
				continue
			}
			shown++
			c <- prometheus.MustNewConstMetric(s.open, prometheus.GaugeValue, 1, id, f.instrument, f.kind, f.severity)
		}
	}
	for _, id := range s.atWork {
		c <- prometheus.MustNewConstMetric(s.work, prometheus.GaugeValue, 1, id)
	}
	for _, e := range dueSoon(s.ends, now) {
		c <- prometheus.MustNewConstMetric(s.due, prometheus.GaugeValue, float64(e.at.Unix()), e.station, e.instrument)
	}
	c <- prometheus.MustNewConstMetric(s.more, prometheus.GaugeValue, float64(hidden))
}
