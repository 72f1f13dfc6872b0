package limit

import "fluxwarden/rules"

// Samples tests that the minute stands on enough samples.
//
//	n >= share * expected
//
// The share is 0.75 by default (own choice). A logger that averages itself sends n; one that does not, sends single samples.
func Samples(n uint32, expected int, l *rules.Limits) rules.Outcome {
	if n == 0 {
		return rules.NoValue
	}
	if float64(n) < l.SamplingShare*float64(expected) {
		return rules.Miss
	}
	return rules.Pass
}

// Clock tests that no stamp of the minute was ahead of the time at which the gate took it.
func Clock(ahead bool) rules.Outcome {
	if ahead {
		return rules.Miss
	}
	return rules.Pass
}

// Conflict tests that no two different values came under one stamp.
func Conflict(two bool) rules.Outcome {
	if two {
		return rules.Miss
	}
	return rules.Pass
}
