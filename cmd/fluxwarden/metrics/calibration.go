package metrics

import (
	"cmp"
	"slices"
	"time"

	"fluxwarden/rules"
)

// How long a calibration is taken to hold where the site file gives it no end, and how long before its end it has a series. Two years
// between calibrations is common practice.
const (
	calibrationHolds    = 2 * 365 * 24 * time.Hour
	calibrationWarnsFor = 60 * 24 * time.Hour
)

// Bounds of the series that only some stations have at a time.
const (
	calibrationSeriesMax = 500
	maintenanceSeriesMax = 500
)

type calibrationEnd struct {
	station, instrument string
	at                  time.Time
}

// Calibrations notes when the calibrations of a site's instruments end.
func (m *Metrics) Calibrations(site *rules.Site) {
	var ends []calibrationEnd
	for i := range site.Stations {
		st := &site.Stations[i]
		for k := range st.Instruments {
			in := &st.Instruments[k]
			if len(in.Calibrations) == 0 {
				continue
			}
			last := in.Calibrations[len(in.Calibrations)-1]
			at := last.To
			if at.IsZero() {
				at = last.From.Add(calibrationHolds)
			}
			ends = append(ends, calibrationEnd{st.ID, in.ID, at})
		}
	}
	slices.SortFunc(ends, func(a, b calibrationEnd) int {
		return cmp.Or(a.at.Compare(b.at), cmp.Compare(a.station, b.station), cmp.Compare(a.instrument, b.instrument))
	})
	m.stations.mu.Lock()
	defer m.stations.mu.Unlock()
	m.stations.ends = ends
}

// dueSoon is those that have ended or will soon, the earliest first.
func dueSoon(ends []calibrationEnd, now time.Time) []calibrationEnd {
	n, _ := slices.BinarySearchFunc(ends, now.Add(calibrationWarnsFor), func(e calibrationEnd, at time.Time) int { return e.at.Compare(at) })
	return ends[:min(n, calibrationSeriesMax)]
}

func (s *stations) setMaintenance(ids []string) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.atWork = nil
	for _, id := range slices.Compact(slices.Sorted(slices.Values(ids))) {
		if _, ok := s.known[id]; ok && len(s.atWork) < maintenanceSeriesMax {
			s.atWork = append(s.atWork, id)
		}
	}
}
