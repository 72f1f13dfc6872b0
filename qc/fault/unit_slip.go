package fault

import "math"

// unitSlip: the value follows what its partners ask for at a thousandth or a thousandfold.
func unitSlip(w *Watcher, c *faultCase, v *view) hint {
	x, want := v.value[c.quantity], v.expected[c.quantity]
	if !math.IsNaN(x) && math.Abs(x) > 5 && math.Abs(x) < 1500 && w.cases[c.index].mean() < 0.1 {
		return hint{odds: -2} // a thousandth of what the sun can give is never so much
	}
	if !v.sunUp || math.IsNaN(x) || math.IsNaN(want) || want < 60 {
		return nothing
	}
	room := float64(0.1*want) + v.room
	for _, factor := range [...]float64{1000, 0.001} {
		if math.Abs(float64(factor*x)-want) < room && math.Abs(x-want) > 3*v.room {
			return hint{0.35, 1 / factor}
		}
	}
	if math.Abs(x) < 5 {
		return hint{odds: -0.3} // about nothing, but it does not follow
	}
	return hint{odds: -2}
}
