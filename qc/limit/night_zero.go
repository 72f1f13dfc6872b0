package limit

import (
	"math"

	"fluxwarden/rules"
)

// NightZero says whether a shortwave value at night stands off its zero.
//
//	|v| <= quiet
//
// W/m2, with quiet the published lower limit of the extremely rare test turned positive (2 W/m2, Long & Dutton 2002, from memory). A miss
// is said and not held against the value as long as the class's offset explains it: NightZeroExcess tells that. Not
// applicable while the sun is above night.zenith.
func NightZero(v, quietWm2 float64, s *Sun, l *rules.Limits) rules.Outcome {
	if math.IsNaN(v) {
		return rules.NoValue
	}
	if s.ZenithDeg < l.NightZenithDeg {
		return rules.SunUp
	}
	if math.Abs(v) > quietWm2 {
		return rules.Miss
	}
	return rules.Pass
}

// NightZeroAllowance is how far below nothing a sound instrument may read: its class's total zero offset and a margin, W/m2.
func NightZeroAllowance(class string, q rules.Quantity, l *rules.Limits) float64 {
	return rules.ClassZeroWm2(class, q) + l.NightZeroExtraWm2
}
