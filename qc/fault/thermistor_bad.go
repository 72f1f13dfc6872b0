package fault

import (
	"math"

	"fluxwarden/rules"
)

// thermistorBad: the body claims a temperature that no body in this air has: absurd at all, or far from how this body has stood to
// the air by day or by night. It is not named while the air temperature itself is missing.
func thermistorBad(w *Watcher, c *faultCase, v *view) hint {
	if !w.setup.Instruments[c.quantity].HasBody {
		return nothing
	}
	air := v.value[rules.AirTemperature]
	if math.IsNaN(v.bodyC) || math.IsNaN(air) {
		return nothing
	}
	k := 0
	if v.mu > 0 {
		k = 1
	}
	usual, room := 0.0, 8.0
	if w.base.bodyKnown[k] {
		usual, room = w.base.bodyAir[k], 3.5
	}
	off := math.Abs(v.bodyC - air - usual)
	switch {
	case off > 2*room:
		return hint{0.5, v.bodyC - air}
	case off > room:
		return hint{0.2, v.bodyC - air}
	case off < 0.6*room:
		return hint{odds: -0.5}
	}
	return nothing
}
