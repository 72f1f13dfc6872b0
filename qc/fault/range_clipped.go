package fault

import "math"

// rangeClipped: global stands at its own top, the very same value again and again, exactly while its partners ask for more.
func rangeClipped(w *Watcher, c *faultCase, v *view) hint {
	x, want := v.value[c.quantity], v.expected[c.quantity]
	if !v.sunUp || math.IsNaN(x) || math.IsNaN(want) {
		return nothing
	}
	room := v.scale(w)
	switch {
	case v.run[c.quantity] >= 2 && x > 100 && want > x+0.5*room:
		return hint{0.5, x}
	case v.run[c.quantity] >= 2 && want < x-2*room:
		return hint{odds: -2} // it stands still where it should fall: frozen
	case x > w.railOf(c)+1 && want > x+room:
		return hint{odds: -0.2}
	case x > w.railOf(c)+1:
		return hint{odds: -1}
	}
	return nothing
}

// railOf is the value that the case has stood at, nothing below any value before it has.
func (w *Watcher) railOf(c *faultCase) float64 {
	s := &w.cases[caseIndex(c)]
	if s.For == 0 {
		return math.Inf(1)
	}
	return s.mean()
}

func caseIndex(c *faultCase) int {
	for i := range catalogueOfCases {
		if &catalogueOfCases[i] == c {
			return i
		}
	}
	return 0
}
