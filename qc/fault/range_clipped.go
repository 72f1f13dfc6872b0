package fault

import "math"

// rangeClipped: global stands at its own top, the very same value again and again, exactly while its partners ask for more. That it
// comes off the top and back to the very same is what tells it from a frozen one; without that it must stand there for an hour.
func rangeClipped(w *Watcher, c *faultCase, v *view) hint {
	x, want := v.value[c.quantity], v.expected[c.quantity]
	if !v.sunUp || math.IsNaN(x) || math.IsNaN(want) {
		return nothing
	}
	room := v.room
	rail := w.railOf(c)
	s := &w.cases[c.index]
	switch {
	case v.run[c.quantity] == 2 && s.For > 2 && math.Abs(x-rail) < 0.05 && v.minute-s.Last > 2:
		return hint{2, x}
	case v.run[c.quantity] >= 2 && x > 100 && want > x+float64(0.5*room):
		return hint{0.08, x}
	case v.run[c.quantity] >= 2 && want < x-float64(2*room):
		return hint{odds: -2} // it stands still where it should fall: frozen
	case x > rail+1 && want > x+room:
		return hint{odds: -0.2}
	case x > rail+1:
		return hint{odds: -1}
	}
	return nothing
}

// railOf is the value that the case has stood at, nothing below any value before it has.
func (w *Watcher) railOf(c *faultCase) float64 {
	s := &w.cases[c.index]
	if s.For == 0 {
		return math.Inf(1)
	}
	return s.mean()
}
