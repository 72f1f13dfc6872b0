package fault

import (
	"math"

	"fluxwarden/rules"
)

// Reflected, ultraviolet and photosynthetic radiation have no closure to be held to, but each is a share of global that nature bounds widely.

// companionShare is the least and the greatest share of global that a companion can have by day: an albedo of dark water and of fresh snow under
// a low sun; 2 to 8 % of ultraviolet; 1.5 to 3 micromoles a joule (common practice, with room).
func companionShare(q rules.Quantity) (least, most float64) {
	switch q {
	case rules.UV:
		return 0.01, 0.15
	case rules.PAR:
		return 1, 4
	}
	return 0.02, 1.6
}

// companionGlobal is the global that a companion is held to, W/m2; NaN where it is too little or in doubt.
func (w *Watcher) companionGlobal(v *view) float64 {
	if g := v.g(); v.sunUp && g > 150 && v.run[rules.Global] < 3 && !w.tainted(rules.Global) {
		return g
	}
	return math.NaN()
}

// companionFrozen: the very same value minute after minute while global has moved by a twentieth and more.
func companionFrozen(w *Watcher, c *faultCase, v *view) hint {
	x := v.value[c.quantity]
	switch g, p := w.companionGlobal(v), w.prev(4).g(); {
	case math.IsNaN(x):
		return nothing
	case v.run[c.quantity] < 2:
		return hint{odds: -8}
	case v.run[c.quantity] >= frozenRun && math.Abs(g-p) > 0.05*g:
		return hint{0.5, x}
	}
	return nothing
}

// companionReversed: well below nothing while the sun is out.
func companionReversed(w *Watcher, c *faultCase, v *view) hint {
	x, g := v.value[c.quantity], w.companionGlobal(v)
	least, _ := companionShare(c.quantity)
	switch {
	case math.IsNaN(x + g):
		return nothing
	case x < -0.5*least*g:
		return hint{0.5, x}
	case x > 0.5*least*g:
		return hint{odds: -2}
	}
	return nothing
}

// companionSlip: ten times and more what global can make of it. A thousandth of it cannot be told from an open input, and is not tried.
func companionSlip(w *Watcher, c *faultCase, v *view) hint {
	x, g := v.value[c.quantity], w.companionGlobal(v)
	least, most := companionShare(c.quantity)
	switch {
	case math.IsNaN(x + g):
		return nothing
	case x > 5*most*g:
		return hint{0.35, x / (g * math.Sqrt(least*most))}
	}
	return hint{odds: -2}
}
