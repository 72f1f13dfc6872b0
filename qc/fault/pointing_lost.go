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
	if low, ok := w.beamMisses(v, k); ok {
		w.kinds.BeamLow.add(low)
		return hint{pointingPartOdds, k}
	}
	switch {
	case b > 0.4*cb && d < 0.75*g:
		return hint{odds: -0.6 * w.pointingPatience()}
	case b > 150 && d < 0.9*g:
		return hint{odds: -0.3 * w.pointingPatience()} // it sees the sun, if through cloud
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

// pointingPatience is by how much a beam that is well followed counts for less: an axis that is off by a few degrees misses the sun at some hours
// of each day and meets it at others, and that is one fault.
func (w *Watcher) pointingPatience() float64 {
	if w.kinds.BeamLow.N >= 45 {
		return 0.1
	}
	return 1
}

const (
	// pointingPartOdds is what a minute of a beam that misses in part says. A uniform veil of cirrus comes near it, so it takes hours.
	pointingPartOdds = 0.04
	// pointingPartLow is by which share the beam must be low at least: less is within what aerosol does.
	pointingPartLow = 0.15
	// pointingPartDims is what share of the beam that is missing may be missing in global: haze and cirrus take a fifth and more of it away
	// altogether (common practice: the rest is scattered forward), a pyrheliometer that looks aside takes nothing.
	pointingPartDims = 0.08
)

// beamMisses says whether direct is low by a part while global is the clear sky's: what dims the beam in the air dims global too, by a part of
// it, and warms the sky; a pyrheliometer that looks past the middle of the sun does neither. It gives by which share direct is low.
func (w *Watcher) beamMisses(v *view, k float64) (low float64, ok bool) {
	b, cb := v.b(), v.clear[rules.Direct]
	low = 1 - b/cb
	if !(low > pointingPartLow && low < 0.92) || v.mu < 0.3 || !(math.Abs(k-1) < 0.05) || !w.followsClear(v) || v.steady != w.prev(0).steady {
		return 0, false
	}
	if lw := v.value[rules.LWDown]; w.base.lwKnown && !math.IsNaN(lw) && lw > v.clear[rules.LWDown]+10 {
		return 0, false
	}
	missing := float64(low*cb) * v.mu
	return low, v.g() > v.clear[rules.Global]-float64(pointingPartDims*missing)
}
