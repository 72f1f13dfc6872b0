package fault

import (
	"math"

	"fluxwarden/rules"
)

// swapFactors turn what came by the other's channel into what it is: with voltages the coefficients stayed where they were.
func (s *Setup) swapFactors() (toGlobal, toDiffuse float64) {
	g, d := &s.Instruments[rules.Global], &s.Instruments[rules.Diffuse]
	if !g.Volts || !d.Volts {
		return 1, 1
	}
	return d.SensitivityUVPerW / g.SensitivityUVPerW, g.SensitivityUVPerW / d.SensitivityUVPerW
}

// channelsSwapped: global and diffuse close with the direct beam when they change places, and not as they are.
func channelsSwapped(w *Watcher, c *faultCase, v *view) hint {
	g, b, d := v.g(), v.b(), v.d()
	if !v.sunUp || math.IsNaN(g+b+d) {
		return nothing
	}
	if float64(b*v.mu) < 60 {
		return nothing
	}
	asIs, swapped := w.swapMisfits(v)
	room := v.room
	switch {
	case swapped < 1.5*room && asIs > 4*room && d-g > 40 && g > 0.06*d && g > 15:
		return hint{0.3, d - g}
	case asIs < 2*room && swapped > 4*room:
		return hint{odds: -1}
	}
	return nothing
}

// swapMisfits says by how many W/m2 global and diffuse miss to close with the beam as they are, and changed places.
func (w *Watcher) swapMisfits(v *view) (asIs, swapped float64) {
	toG, toD := w.setup.swapFactors()
	g, beam, d := v.g(), float64(v.b()*v.mu), v.d()
	closure := w.base.closureAt(v)
	return math.Abs(g - float64(closure*(beam+d))), math.Abs(float64(d*toG) - float64(closure*(beam+float64(g*toD))))
}
