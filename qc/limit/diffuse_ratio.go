package limit

import (
	"math"

	"fluxwarden/rules"
)

// DiffuseRatio tests that diffuse is not more than global.
//
//	D <= G + sqrt(((ratio - 1) * G)^2 + floor^2)
//
// W/m2; ratio 1.05 below 75 degrees and 1.10 to 93, for G above 50 W/m2 (Long & Dutton 2002, from memory). The floor is
// closure's, for the same reason. Not applicable without both, with a small global or a low sun.
func DiffuseRatio(g, d float64, s *Sun, l *rules.Limits) rules.Outcome {
	if math.IsNaN(d) {
		return rules.NoValue
	}
	if math.IsNaN(g) {
		return rules.NoPartner
	}
	if s.ZenithDeg >= LowSunZenithDeg {
		return rules.SunTooLow
	}
	if g <= l.DiffuseRatioMinWm2 {
		return rules.TooSmall
	}
	ratio := l.DiffuseRatioHigh
	if s.ZenithDeg >= HighSunZenithDeg {
		ratio = l.DiffuseRatioLow
	}
	if d > g+together((ratio-1)*g, l.ClosureFloorWm2) {
		return rules.Miss
	}
	return rules.Pass
}
