package sun

import (
	"math"

	"fluxwarden/qc/exact"
)

// RiseSetState tells whether the sun crosses the horizon on a day.
type RiseSetState uint8

const (
	SunRisesAndSets RiseSetState = iota
	SunStaysUp
	SunStaysDown
)

// Events holds the times of rise, transit and set in seconds from 00:00 UTC of the day asked for.
// Transit is the one nearest local mean noon of that date; rise precedes and set follows it, so
// each may lie outside 0..86400. Rise and set are NaN unless the state is SunRisesAndSets.
type Events struct {
	RiseSeconds, TransitSeconds, SetSeconds float64
	State                                   RiseSetState
}

// riseElevationDeg is the geocentric elevation of the sun's centre when its upper limb is seen on
// the horizon: 34' of refraction and 16' of radius.
const riseElevationDeg = -0.8333

// RiseSet returns the events of a date (days since 1970-01-01) at a site.
//
// Source: Reda and Andreas, appendix A.2, with h0' = -0.8333 degrees. The report
// interpolates between three midnights; here the position is evaluated at each trial time,
// which is the limit of its iteration. Good to a second away from grazing days.
// Deviation: the report gives the events that fall into one UTC day, which west of Greenwich puts
// the evening before beside the morning after; here the three belong to one day of the site.
// Worked value: rise 06:12:43, transit 11:46:05 local on the report's example day.
func RiseSet(day int64, site Site, deltaTSeconds float64) Events {
	start := daysFromJ2000(day * microsPerDay)
	at := func(seconds float64) (hourAngleDeg, sinDelta, cosDelta float64) {
		g := geocentricAt(start+seconds/secondsPerDay, deltaTSeconds)
		sinDelta, cosDelta = sincosDeg(g.deltaDeg)
		return wrap180(g.nu + site.LongitudeDeg - g.alpha), sinDelta, cosDelta
	}
	e := Events{RiseSeconds: math.NaN(), SetSeconds: math.NaN()}
	e.TransitSeconds = 43200 - float64(240*site.LongitudeDeg)
	for range 3 { // the sun gains at most 30 s a day: three steps leave microseconds
		h, _, _ := at(e.TransitSeconds)
		e.TransitSeconds -= float64(240 * h)
	}
	_, sinDelta, cosDelta := at(e.TransitSeconds)
	half, state := halfDayDeg(site.LatitudeDeg, sinDelta, cosDelta)
	if e.State = state; state != SunRisesAndSets {
		return e
	}
	rise, riseOK := crossing(site, at, e.TransitSeconds-float64(240*half), -1)
	set, setOK := crossing(site, at, e.TransitSeconds+float64(240*half), 1)
	if !riseOK || !setOK { // a day on the edge of polar day or night
		e.State = SunStaysDown
		if float64(sinDelta*sinDeg(site.LatitudeDeg)) > 0 {
			e.State = SunStaysUp
		}
		return e
	}
	e.RiseSeconds, e.SetSeconds = rise, set
	return e
}

// crossing refines one horizon crossing; side is -1 for the rise, 1 for the set.
func crossing(site Site, at func(float64) (h, sinDelta, cosDelta float64), seconds, side float64) (float64, bool) {
	for range 8 {
		h, sinDelta, cosDelta := at(seconds)
		half, state := halfDayDeg(site.LatitudeDeg, sinDelta, cosDelta)
		if state != SunRisesAndSets {
			return 0, false
		}
		step := float64(240 * wrap180(float64(side*half)-h))
		seconds += step
		if math.Abs(step) < 1e-3 {
			break
		}
	}
	return seconds, true
}

// halfDayDeg returns the hour angle of the horizon crossing (report, eq. A4).
func halfDayDeg(latitudeDeg, sinDelta, cosDelta float64) (float64, RiseSetState) {
	sinPhi, cosPhi := sincosDeg(latitudeDeg)
	numerator := sinDeg(riseElevationDeg) - float64(sinPhi*sinDelta)
	denominator := float64(cosPhi * cosDelta)
	switch {
	case numerator >= denominator:
		return 0, SunStaysDown
	case numerator <= -denominator:
		return 180, SunStaysUp
	}
	return float64(exact.Acos(numerator/denominator) * degPerRad), SunRisesAndSets
}
