package fault

import (
	"math"

	"fluxwarden/rules"
)

// shadeOff: with the beam where it should be, diffuse stands above what global less direct leaves by a share of the beam, while
// that remainder is a plausible diffuse: part of the beam reaches the diffuse instrument. Under cloud nothing is amiss.
func shadeOff(w *Watcher, c *faultCase, v *view) hint {
	g, b, d := v.g(), v.b(), v.d()
	if !v.sunUp || math.IsNaN(g+b+d) {
		return nothing
	}
	beam := float64(b * v.mu)
	if beam < 100 {
		return nothing
	}
	if asIs, swapped := w.swapMisfits(v); swapped < 1.5*v.room && asIs > 4*v.room {
		return nothing // changed places they close
	}
	want := v.expected[rules.Diffuse]
	excess := d - want
	room := v.room
	share := excess / beam
	plausible := want > 0.3*v.clear[rules.Diffuse] && want < float64(4*v.clear[rules.Diffuse])+40
	switch {
	case excess > 3*room && share > 0.15 && share < 1.15 && plausible && d-g < float64(0.06*g)+room:
		return hint{0.3, share}
	case math.Abs(excess) < 1.5*room && w.shareSeen(c)*beam > 4*room:
		return hint{odds: -1}
	}
	return nothing
}

// shareSeen is the share of the beam that the case rests on.
func (w *Watcher) shareSeen(c *faultCase) float64 {
	if s := &w.cases[c.index]; s.For > 0 {
		return s.mean()
	}
	return 0.15
}
