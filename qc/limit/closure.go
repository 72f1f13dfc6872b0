package limit

import (
	"math"

	"fluxwarden/rules"
)

// HighSunZenithDeg parts the two tolerances of the closure and diffuse-ratio tests. The published text leaves exactly 75
// degrees open; here it belongs to the low sun.
const HighSunZenithDeg = 75

// LowSunZenithDeg is where closure and diffuse ratio end. Source: Long & Dutton 2002 (from memory).
const LowSunZenithDeg = 93

// Closure tests global against direct on the horizontal plus diffuse.
//
//	|G - (B*mu + D)| <= sqrt((tolerance * (B*mu + D))^2 + floor^2)
//
// Inputs in W/m2, as measured; mu is of the apparent sun. The relative tolerance is 0.08 below 75 degrees and 0.15 to 93
// (Long & Dutton 2002, from memory). The floor is a deviation from it: the published ratio says nothing of zero offsets and directional
// errors, which three class A instruments together may have 20 W/m2 of, and without which a ten-watt offset would question every dull minute. The two
// are independent, so they add as uncertainties do; with a floor of nothing it is the published test. Not applicable without all three,
// with a sum not above ClosureMinWm2, or with the sun behind the horizon mask.
func Closure(g, b, d float64, s *Sun, l *rules.Limits) rules.Outcome {
	if math.IsNaN(g) {
		return rules.NoValue
	}
	if math.IsNaN(b) || math.IsNaN(d) {
		return rules.NoPartner
	}
	if s.ZenithDeg >= LowSunZenithDeg {
		return rules.SunTooLow
	}
	if s.Hidden {
		return rules.SunHidden
	}
	sum := float64(b*s.BeamMu) + d
	if sum <= l.ClosureMinWm2 {
		return rules.TooSmall
	}
	tolerance := l.ClosureHigh
	if s.ZenithDeg >= HighSunZenithDeg {
		tolerance = l.ClosureLow
	}
	if math.Abs(g-sum) > together(tolerance*sum, l.ClosureFloorWm2) {
		return rules.Miss
	}
	return rules.Pass
}

// together is the root of the sum of two squares: what two independent uncertainties come to.
func together(a, b float64) float64 { return math.Sqrt(float64(a*a) + float64(b*b)) }
