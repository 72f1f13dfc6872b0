package daemon

import (
	"slices"
	"sync"
	"sync/atomic"

	"fluxwarden/cmd/fluxwarden/console"
	"fluxwarden/cmd/fluxwarden/metrics"
	"fluxwarden/cmd/fluxwarden/notify"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
)

// A hub hears of judged minutes and episodes and passes them on: to the metrics, to the console, to who started the daemon.
type hub struct {
	metrics    *metrics.Metrics
	onMinutes  func(j *engine.Judged, from, to int)
	onEpisodes func(station string, episodes []fault.Episode)

	console *console.Console
	notify  atomic.Pointer[notify.Notifier]

	mu    sync.Mutex
	heard map[string]bool            // stations that a reading has been judged of
	told  map[string][]fault.Episode // what was said last of each station
}

// Minutes implements worker.Live.
func (h *hub) Minutes(j *engine.Judged, from, to int) {
	h.mu.Lock()
	if !h.heard[j.Station] { // a day's minutes before the first reading ever heard are nobody's loss
		for from < to && j.Records[from] == 0 {
			from++
		}
		h.heard[j.Station] = from < to
	}
	h.mu.Unlock()
	h.metrics.Minutes(j, from, to)
	h.console.Minutes(j, from, to)
	if h.onMinutes != nil {
		h.onMinutes(j, from, to)
	}
}

// Episodes implements worker.Live.
func (h *hub) Episodes(station string, episodes []fault.Episode) {
	h.mu.Lock()
	if h.told == nil {
		h.told = map[string][]fault.Episode{}
	}
	h.told[station] = slices.Clone(episodes)
	h.mu.Unlock()
	h.metrics.Episodes(station, episodes)
	h.console.Episodes(station, episodes)
	if n := h.notify.Load(); n != nil {
		n.Episodes(station, episodes)
	}
	if h.onEpisodes != nil {
		h.onEpisodes(station, episodes)
	}
}

// episodes is what was said last of a station.
func (h *hub) episodes(station string) []fault.Episode {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.told[station]
}
