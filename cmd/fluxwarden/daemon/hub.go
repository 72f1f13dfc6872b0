package daemon

import (
	"maps"
	"slices"
	"sync"
	"time"

	"fluxwarden/cmd/fluxwarden/metrics"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// A hub hears of judged minutes and episodes and passes them on: to the metrics, to the status page, to who started the daemon.
type hub struct {
	metrics    *metrics.Metrics
	onMinutes  func(j *engine.Judged, from, to int)
	onEpisodes func(station string, episodes []fault.Episode)

	mu       sync.Mutex
	stations map[string]*stationState
	minutes  int64
}

// A stationState is what the status page shows of a station.
type stationState struct {
	Last     time.Time // end of the last judged minute
	Verdicts [rules.VerdictCount]int64
	Open     []fault.Episode
}

// Minutes implements worker.Live.
func (h *hub) Minutes(j *engine.Judged, from, to int) {
	h.mu.Lock()
	st := h.station(j.Station)
	if st.Last.IsZero() { // a day's minutes before the first reading ever heard are nobody's loss
		for from < to && j.Records[from] == 0 {
			from++
		}
	}
	h.metrics.Minutes(j, from, to)
	if at := time.Unix((j.Day*minute.PerDay+int64(to))*60, 0).UTC(); at.After(st.Last) {
		st.Last = at
	}
	for k := range j.Series {
		if s := &j.Series[k]; s.Primary && int(s.Quantity) < rules.RadiationCount {
			for i := from; i < to; i++ {
				st.Verdicts[s.Verdict[i]]++
			}
		}
	}
	h.minutes += int64(max(to-from, 0))
	h.mu.Unlock()
	if h.onMinutes != nil {
		h.onMinutes(j, from, to)
	}
}

// Episodes implements worker.Live.
func (h *hub) Episodes(station string, episodes []fault.Episode) {
	h.metrics.Episodes(station, episodes)
	var open []fault.Episode
	for _, e := range episodes {
		if e.To == fault.Open {
			open = append(open, e)
		}
	}
	h.mu.Lock()
	h.station(station).Open = open
	h.mu.Unlock()
	if h.onEpisodes != nil {
		h.onEpisodes(station, episodes)
	}
}

func (h *hub) station(id string) *stationState {
	st := h.stations[id]
	if st == nil {
		st = &stationState{}
		h.stations[id] = st
	}
	return st
}

// view is a copy for the status page.
func (h *hub) view() (ids []string, states map[string]stationState) {
	h.mu.Lock()
	defer h.mu.Unlock()
	states = make(map[string]stationState, len(h.stations))
	for id, st := range h.stations {
		states[id] = *st
	}
	return slices.Sorted(maps.Keys(states)), states
}
