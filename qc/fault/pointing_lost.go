package fault

import (
	"math"

	"fluxwarden/rules"
)

// pointingLost: the beam has gone while global stays smooth and near the site's clear sky, and diffuse meets global: the sun is out
// and neither the pyrheliometer nor the shade follows it. Every thick cloud takes the beam and lets diffuse meet global too, but
// then global is far below the clear sky or moves. A beam that comes back for some minutes a day, where the tracker stands,
// does not end it; half an hour of sun well followed does.
func pointingLost(w *Watcher, c *faultCase, v *view) hint {
	g, b, d := v.g(), v.b(), v.d()
	cg, cb := v.clear[rules.Global], v.clear[rules.Direct]
	if !v.sunUp || math.IsNaN(g+b+d) || !w.base.skyKnown || v.mu < 0.25 || cg < 80 {
		return nothing
	}
	k := g / cg
	switch {
	case b > 0.4*cb && d < 0.75*g:
		return hint{odds: -0.6}
	case b > 150 && d < 0.9*g:
		return hint{odds: -0.3} // it sees the sun, if through cloud
	case v.tracker == HouseOut: // it says so itself
		return hint{0.4, k}
	case b < 0.08*cb && math.Abs(d-g) < float64(0.06*g)+10 && k > 0.85 && k < 1.12 && w.followsClear(v):
		return hint{0.3 + float64(2*max(0, k-0.9)), k}
	}
	return nothing
}

// followsClear says whether global moved in the last minutes as the clear sky did.
func (w *Watcher) followsClear(v *view) bool {
	for i := range historyViews {
		p := w.prev(i)
		if p.minute != v.minute-1-int64(i) {
			return false
		}
		if !(math.Abs((v.g()-p.g())-(v.clear[rules.Global]-p.clear[rules.Global])) < 6) {
			return false
		}
	}
	return true
}
