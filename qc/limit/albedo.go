package limit

import (
	"math"

	"fluxwarden/rules"
)

// Albedo tests that not more is reflected than came down.
//
//	U <= ref + offset,  ref = B*mu + D where both are there, else G; for ref above 50 W/m2
//
// W/m2. Source: Long & Dutton 2002 (from memory). Not applicable without a reference or with a small one.
func Albedo(u, g, b, d float64, s *Sun, l *rules.Limits) rules.Outcome {
	if math.IsNaN(u) {
		return rules.NoValue
	}
	ref := float64(b*s.BeamMu) + d
	if math.IsNaN(ref) {
		ref = g
	}
	if math.IsNaN(ref) {
		return rules.NoPartner
	}
	if s.ZenithDeg >= LowSunZenithDeg {
		return rules.SunTooLow
	}
	if ref <= l.AlbedoMinWm2 {
		return rules.TooSmall
	}
	if u > ref+l.AlbedoOffsetWm2 {
		return rules.Miss
	}
	return rules.Pass
}
