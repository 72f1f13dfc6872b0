package fault

import (
	"math"
	"slices"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/sensor"
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
	DewGap     [8]Number `json:"dew_gap"` // K, of the last eight hours, newest first
	AirC       [8]Number `json:"air_c"`   // degrees C, likewise
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
		copy(w.slow.DewGap[1:], w.slow.DewGap[:7])
		copy(w.slow.AirC[1:], w.slow.AirC[:7])
		w.slow.AirC[0] = quantise(v.value[rules.AirTemperature])
		w.slow.DewGap[0] = quantise(dewGap(v.value[rules.AirTemperature], v.value[rules.Humidity]))
	}
}

// dewGap is about how far the air is above its dew point, below freezing its frost point, K: the Clausius-Clapeyron relation with the latent
// heat of condensation, 2.50e6 J/kg (2.83e6 over ice), and the gas constant of vapour, 461.5 J/(kg K). NaN without the weather.
func dewGap(airC, humidityPercent float64) float64 {
	tK := airC + sensor.ZeroCelsiusK
	if !(humidityPercent > 0 && tK > 0) {
		return math.NaN()
	}
	logRatio, perK := exact.Log(humidityPercent/100), 2.50e6/461.5/(tK*tK)
	if airC < 0 {
		logRatio += float64((2.83e6 - 2.50e6) / 461.5 * (1/tK - 1/sensor.ZeroCelsiusK))
		perK = 2.83e6 / 461.5 / (tK * tK)
	}
	return -logRatio / perK
}

// forgetWeather starts without any.
func (c *SlowCarry) forgetWeather() {
	for i := range c.DewGap {
		c.DewGap[i], c.AirC[i] = Number(math.NaN()), Number(math.NaN())
	}
}

// leastDewGap is the least of the last eight hours, K.
func (w *Watcher) leastDewGap() float64 { return leastOf(&w.slow.DewGap) }

// coldest is the least air temperature of the last eight hours, degrees C.
func (w *Watcher) coldest() float64 { return leastOf(&w.slow.AirC) }

// leastOf is the least of some hours, 99 where none is known.
func leastOf(hours *[8]Number) float64 {
	least := 99.0
	for _, h := range hours {
		if !math.IsNaN(h.Float()) {
			least = min(least, h.Float())
		}
	}
	return least
}

func (c SlowCarry) clone() SlowCarry {
	c.Jumps, c.Dips = slices.Clone(c.Jumps), slices.Clone(c.Dips)
	return c
}
