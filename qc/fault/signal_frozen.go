package fault

import (
	"math"

	"fluxwarden/rules"
)

const (
	// frozenRun is how many minutes on end the very same value may come by chance: a thermopile outdoors moves by more than
	// a logger resolves within two or three (own choice).
	frozenRun = 8
	// frozenAboveWm2 keeps out what a dark or shaded instrument stands at for hours.
	frozenAboveWm2 = 15
)

// signalFrozen: the very same value minute after minute, well above nothing. A clipped one stands still too, but at its top and
// only while its partners ask for more.
func signalFrozen(w *Watcher, c *faultCase, v *view) hint {
	x := v.value[c.quantity]
	if math.IsNaN(x) {
		return nothing
	}
	if v.run[c.quantity] < 2 {
		return hint{odds: -8}
	}
	if v.run[c.quantity] < frozenRun || math.Abs(x) < frozenAboveWm2 {
		return nothing
	}
	want := v.expected[c.quantity]
	switch {
	case v.night:
		return hint{1, x}
	case math.IsNaN(want):
		return hint{0.2, x}
	case math.Abs(want-x) > 3*v.room && !(c.quantity == rules.Global && want > x):
		return hint{0.5, x}
	case c.quantity == rules.Global && want > x+v.room:
		return nothing // it may be clipped there
	}
	return hint{0.15, x}
}

// longwaveFrozen: the very same longwave flux minute after minute. Under fog it moves little, but not by nothing.
func longwaveFrozen(w *Watcher, c *faultCase, v *view) hint {
	x := v.value[c.quantity]
	if math.IsNaN(x) {
		return nothing
	}
	if v.run[c.quantity] < 2 {
		return hint{odds: -8}
	}
	if v.run[c.quantity] < 3*frozenRun {
		return nothing
	}
	return hint{0.5, x}
}
