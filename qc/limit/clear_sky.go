package limit

import (
	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

// clearSkyMuMin is the least cosine of the sun at which the learnt sky means something: nearer the horizon its error is as large as itself.
const clearSkyMuMin = 0.1

// clearSkyApplies gives the reason why the learnt sky says nothing of a minute, rules.Pass where it does.
func clearSkyApplies(v float64, learnt, eclipsed bool, s *Sun) rules.Outcome {
	switch {
	case v != v:
		return rules.NoValue
	case !learnt:
		return rules.NotLearnt
	case s.Hidden:
		return rules.SunHidden
	case eclipsed:
		return rules.EclipseNow
	case s.BeamMu < clearSkyMuMin:
		return rules.SunTooLow
	}
	return rules.Pass
}

// ClearDirect tests a beam against the one that the least aerosol load of the learnt sky's band would leave, W/m2: nothing makes the sun
// brighter than a clean sky.
//
//	B <= factor * cleanest + above
//
// Own choice of both; not applicable before the sky is learnt, under a low or hidden sun and in an eclipse.
func ClearDirect(b, cleanestWm2 float64, learnt, eclipsed bool, s *Sun, l *rules.Limits) rules.Outcome {
	o := clearSkyApplies(b, learnt, eclipsed, s)
	if o == rules.Pass && b > float64(l.ClearDirectFactor*cleanestWm2)+l.ClearAboveWm2 {
		return rules.Miss
	}
	return o
}

// ClearGlobal tests a global that has been above factor * clear + above for `run` minutes on end: a cloud edge lifts it so, but moves on. It
// misses from the minute on in which the run is as long as the limit.
func ClearGlobal(g, clearWm2 float64, run *int, learnt, eclipsed bool, s *Sun, l *rules.Limits) rules.Outcome {
	o := clearSkyApplies(g, learnt, eclipsed, s)
	if o != rules.Pass || !(g > float64(l.ClearGlobalFactor*clearWm2)+l.ClearAboveWm2) {
		*run = 0
		return o
	}
	*run++
	if float64(*run) >= l.ClearGlobalMinutes {
		return rules.Miss
	}
	return o
}

// ClearLongwave is the soft band of the sky's longwave: not much below the learnt cloudless one, not much above a black body's at air
// temperature, which a low overcast is. Not applicable without air temperature and humidity (the cloudless one is NaN then) or before it is
// learnt.
func ClearLongwave(v, clearWm2, airC float64, learnt bool, l *rules.Limits) rules.Outcome {
	switch {
	case v != v:
		return rules.NoValue
	case clearWm2 != clearWm2 || airC != airC:
		return rules.NoWeather
	case !learnt:
		return rules.NotLearnt
	case v < float64(l.ClearLWBelowFactor*clearWm2) || v > sensor.BlackbodyFlux(airC+sensor.ZeroCelsiusK)+l.ClearLWAboveWm2:
		return rules.Miss
	}
	return rules.Pass
}
