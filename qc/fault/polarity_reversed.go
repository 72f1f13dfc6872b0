package fault

import "math"

// polarityReversed: the value is what its partners ask for with the sign turned round.
func polarityReversed(w *Watcher, c *faultCase, v *view) hint {
	x, want := v.value[c.quantity], v.expected[c.quantity]
	if x > 20 {
		return hint{odds: -2}
	}
	if !v.sunUp || math.IsNaN(x) || math.IsNaN(want) {
		return nothing
	}
	room := v.room + float64(0.05*want)
	switch {
	case want < 40:
		return nothing
	case x < -20 && math.Abs(x+want) < room:
		return hint{0.5, x}
	}
	return nothing
}
