package fault

import (
	"math"
	"slices"

	"fluxwarden/rules"
)

// SlowCarry is what the slow kinds hand on over midnight.
type SlowCarry struct {
	Imbalance  imbalance `json:"imbalance"`
	Episode    string    `json:"episode,omitempty"` // id of the imbalance's open episode
	Jumps      []jump    `json:"jumps,omitempty"`
	Conflicts  int64     `json:"conflicts,omitempty"` // stamps in a row that came twice
	ConflictAt int64     `json:"conflict_at,omitempty"`
	Dips       []dip     `json:"dips,omitempty"`
	Dip        dip       `json:"dip"`
	FullBeam   int       `json:"full_beam,omitempty"`
	Humid      [8]Number `json:"humid"` // mean humidity of the last eight hours, newest first
	Sunrise    int64     `json:"sunrise"`
}

// watchSlow takes a minute into the kinds that need hours or days.
func (w *Watcher) watchSlow(v *view) {
	w.watchWeather(v)
	w.watchConflicts(v)
	for _, q := range threeShortwave {
		if !w.setup.Instruments[q].Present {
			return
		}
	}
	w.watchClock(v)
	w.watchShadow(v)
	w.watchImbalance(v)
}

// watchWeather remembers when the sun rose and how humid the hours before were.
func (w *Watcher) watchWeather(v *view) {
	if v.mu > 0 && w.prev(0).mu <= 0 {
		w.slow.Sunrise = v.minute
	}
	w.sunrise = w.slow.Sunrise
	if v.minute%60 == 0 {
		copy(w.slow.Humid[1:], w.slow.Humid[:7])
		w.slow.Humid[0] = quantise(v.value[rules.Humidity])
	}
}

// humid is the most humid of the last eight hours, %.
func (w *Watcher) humid() float64 {
	most := 0.0
	for _, h := range w.slow.Humid {
		if !math.IsNaN(h.Float()) {
			most = max(most, h.Float())
		}
	}
	return most
}

func (c SlowCarry) clone() SlowCarry {
	c.Jumps, c.Dips = slices.Clone(c.Jumps), slices.Clone(c.Dips)
	return c
}
