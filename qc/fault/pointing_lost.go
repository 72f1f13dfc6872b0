package fault

import (
	"math"

	"fluxwarden/rules"
)

// pointingLost: the beam has gone and diffuse meets global, but global is as bright as under a clear sky: the sun is out and neither the
// pyrheliometer nor the shade follows it. Every thick cloud takes the beam and lets diffuse meet global too, but then global is far below the
// clear sky: of 47,000 measured minutes above nine tenths of it none had lost the beam so, of 7,700 above eight tenths 13, of 4,700 above
// seven tenths 92 (nine months at 56 degrees north, the sun more than 14 degrees high). Only over snow a cloud is as bright: there global must follow
// the clear sky, or the longwave tell it. A dimmer minute without beam says little; it only marks when the loss may have begun. A beam that
// comes back for some minutes a day, where the tracker stands, does not end it; half an hour of sun well followed does.
func pointingLost(w *Watcher, c *faultCase, v *view) hint {
	g, b, d := v.g(), v.b(), v.d()
	cg, cb := v.clear[rules.Global], v.clear[rules.Direct]
	if !v.sunUp || math.IsNaN(g+b+d) || !w.base.skyKnown || cg < 80 {
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
	case !(b < 0.08*cb && math.Abs(d-g) < float64(0.06*g)+10) || k < dimmest || k > brightest:
		return nothing
	case k > 0.8 && b < offSunWm2 && v.mu >= 0.25 && w.noBrightCloud(v) && !w.clockJumped(v):
		return w.pointingHint(c, k)
	}
	switch s := &w.cases[c.index]; {
	case s.Score > pointingMark:
		return nothing
	case s.Since != noMinute && v.minute-s.Since > pointingMarkFor:
		return hint{odds: -2} // begin anew
	}
	return hint{0.01, k}
}

const (
	// dimmest and brightest are the shares of the clear sky between which global without beam may be the sun's own.
	dimmest, brightest = 0.5, 1.35
	// offSunWm2 is what a pyrheliometer beside the sun may still say: its offset, and the sky.
	offSunWm2 = 3.0
	// pointingMark is the score that dim minutes alone can come to: enough to remember the first of them.
	pointingMark = 1.0
	// pointingMarkFor is for how many minutes they may do so.
	pointingMarkFor = 90
)

// pointingHint weighs a bright minute without beam at a share k of the clear sky. Bright minutes come together, and the learnt clear sky may be
// some percent too dark, so those below nine tenths cannot raise it alone.
func (w *Watcher) pointingHint(c *faultCase, k float64) hint {
	switch {
	case k > 0.9:
		return hint{0.6, k}
	case w.cases[c.index].Score < c.raise-2:
		return hint{0.1, k}
	}
	return nothing
}

// clockJumped says whether the clock has jumped far of late, so that the clear sky may be that of another hour.
func (w *Watcher) clockJumped(v *view) bool {
	for i := range w.slow.Jumps {
		if j := &w.slow.Jumps[i]; v.minute-j.At < 1440 && max(j.Shift, -j.Shift) > 10 {
			return true
		}
	}
	return false
}

// noBrightCloud says whether no cloud can feign the sun: nothing freezes, or the longwave is that of a clear sky, or global moves as the clear
// sky does.
func (w *Watcher) noBrightCloud(v *view) bool {
	if !(v.value[rules.AirTemperature] < snowAirC) { // also where it is not known
		return true
	}
	if lw := v.value[rules.LWDown]; w.base.lwKnown && lw < float64(1.1*v.clear[rules.LWDown]) {
		return true
	}
	return w.followsClear(v)
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
