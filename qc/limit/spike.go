package limit

import (
	"math"

	"fluxwarden/rules"
)

// Spike tests that a minute does not stand alone: it misses where the value is off both its neighbours, to the same side, by
// more than mostWm2, and the partner does not follow by half as much. Before and after are the minutes beside it; the partner is what
// should follow (for global: direct on the horizontal plus diffuse), all NaN where there is none. Shortwave by day needs a
// partner: the edge of a cloud is no spike. Own choice of limits.
func Spike(before, v, after, partnerBefore, partner, partnerAfter, mostWm2 float64, needPartner bool) rules.Outcome {
	if math.IsNaN(v) {
		return rules.NoValue
	}
	if math.IsNaN(before) || math.IsNaN(after) {
		return rules.NoHistory
	}
	if a, b := v-before, v-after; !(a > mostWm2 && b > mostWm2) && !(a < -mostWm2 && b < -mostWm2) {
		return rules.Pass
	}
	up := min(v-before, v-after)
	down := min(before-v, after-v)
	off := max(up, down)
	if math.IsNaN(partner) || math.IsNaN(partnerBefore) || math.IsNaN(partnerAfter) {
		if needPartner {
			return rules.NoPartner
		}
		return rules.Miss
	}
	follows := min(partner-partnerBefore, partner-partnerAfter)
	if down > up {
		follows = min(partnerBefore-partner, partnerAfter-partner)
	}
	if follows > off/2 {
		return rules.Pass
	}
	return rules.Miss
}
