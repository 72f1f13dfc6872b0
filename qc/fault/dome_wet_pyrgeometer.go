package fault

import (
	"math"

	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

// wetPyrgeometer: a wet dome radiates to its own case, so the net signal goes to nothing. So do fog and low cloud. It is told from
// them by day, where the sun shines as from a clear sky, and by night by how it came: within two minutes, where a cloud that fills the
// sky takes longer, and stands still.
func wetPyrgeometer(w *Watcher, c *faultCase, v *view) hint {
	net, clear := w.netLongwave(v), v.clear[rules.LWDown]
	if math.IsNaN(net) || math.IsNaN(clear) || !w.base.lwKnown {
		return nothing
	}
	air := blackBodyC(v.value[rules.AirTemperature])
	deep := clear - air // what the net would be under a clear sky, negative
	if deep > -35 {
		return nothing
	}
	wet := net > 0.25*deep
	sunny := v.sunUp && v.b() > 0.6*v.clear[rules.Direct] && v.b() > 150
	s := &w.cases[c.index]
	switch {
	case wet && sunny:
		return hint{0.3, net}
	case !wet && net < 0.45*deep:
		return hint{odds: -1}
	case wet && s.Since != noMinute:
		return hint{0.05, net}
	case wet && w.jumpedTo(net, 0.35*deep):
		return hint{2, net}
	}
	return nothing
}

// jumpedTo says whether the net longwave stood far below until a few minutes ago and has come up at once.
func (w *Watcher) jumpedTo(net, from float64) bool {
	p, o := w.netLongwave(w.prev(0)), w.netLongwave(w.prev(2))
	return p < from && o < from && math.Abs(p-o) < 8 && net-p > 25 && net-p > 3*math.Abs(p-o)
}

// netLongwave is the flux less what a black body at the instrument's own temperature, or at the air's, would emit.
func (w *Watcher) netLongwave(v *view) float64 {
	if !math.IsNaN(v.net) {
		return v.net
	}
	return v.value[rules.LWDown] - blackBodyC(v.value[rules.AirTemperature])
}

func blackBodyC(tC float64) float64 { return sensor.BlackbodyFlux(tC + sensor.ZeroCelsiusK) }
