package fault

import (
	"math"

	"fluxwarden/rules"
)

// signalBlank: the instrument's channel is blank, or holds the logger's mark, while the station's records go on. Odds: a logger's
// single blank happens; ten in a row hardly do (own choice: 0.4 a minute).
func signalBlank(w *Watcher, c *faultCase, v *view) hint {
	switch {
	case !math.IsNaN(v.value[c.quantity]):
		return hint{odds: -8}
	case c.quantity == rules.LWDown && !math.IsNaN(v.net):
		return nothing // the thermopile speaks; it is the body temperature that is missing
	}
	return hint{0.4, 0}
}

// signalLost is signalBlank, and besides an input that floats about nothing while the other two of global, direct and
// diffuse ask for much: an open circuit. A shadow on the pyrheliometer leaves a little of the beam and lasts minutes, a slipped
// unit follows the sun a thousandfold smaller, so minutes that could be these count for less.
func signalLost(w *Watcher, c *faultCase, v *view) hint {
	x := v.value[c.quantity]
	if math.IsNaN(x) {
		return hint{0.4, 0}
	}
	want := v.expected[c.quantity]
	if !v.sunUp || math.IsNaN(want) {
		if math.Abs(x) > openCircuitWm2 && v.sunUp {
			return hint{odds: -8}
		}
		return nothing
	}
	switch {
	case math.Abs(x) > openCircuitWm2:
		return hint{odds: -8}
	case !w.missedMuch(c.quantity, v):
		return nothing
	case math.Abs(float64(1000*x)-want) < 0.5*want:
		return nothing
	}
	return hint{0.16, x - want}
}

// openCircuitWm2 is how far from nothing an open input may float.
const openCircuitWm2 = 5

// missedMuch says whether the partners ask for so much that nothing is too little: more than an offset or a wrong gain of one of
// them could feign. In watts on the horizontal, and for the beam as a share of global.
func (w *Watcher) missedMuch(q rules.Quantity, v *view) bool {
	want := v.expected[q]
	if q == rules.Direct {
		if v.d() < float64(0.05*v.g()) {
			return false // no sky gives so little diffuse: it is diffuse that is lost
		}
		if v.g() < 0.4*v.clear[rules.Global] || v.d() < 0.3*v.clear[rules.Diffuse] {
			return false // the sun is not out, or snow lies on the domes
		}
		want *= v.mu
		return want > 50 && want > 4*v.room && want > 0.3*v.g()
	}
	return want > 60 && want > 3*v.room
}
