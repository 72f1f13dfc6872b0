package limit

import (
	"math"

	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

func blackBody(tK float64) float64 {
	t2 := tK * tK
	return float64(sensor.StefanBoltzmann * t2 * t2)
}

// AirUsable says whether an air temperature is plausible enough for other tests to lean on. Long & Dutton 2002 (from
// memory) ask for 170 to 350 K; the station's own bounds are inside that.
func AirUsable(airC float64, l *rules.Limits) bool {
	return airC >= l.AirTemperatureMinC && airC <= l.AirTemperatureMaxC
}

// LWDownAir tests longwave from the sky against the air temperature.
//
//	0.4*sigma*Ta^4 < Ld < sigma*Ta^4 + 25
//
// W/m2, Ta in kelvin. Source: Long & Dutton 2002 (from memory). Worked value: Ta 273.15: 126.26 to 340.66. In an inversion the sky
// may be warmer than the air at the mast, so a miss never rejects.
func LWDownAir(ld, airC float64, l *rules.Limits) rules.Outcome {
	if math.IsNaN(ld) {
		return rules.NoValue
	}
	if !AirUsable(airC, l) {
		return rules.NoWeather
	}
	lo, hi := LWDownAirBounds(airC, l)
	if ld <= lo || ld >= hi {
		return rules.Miss
	}
	return rules.Pass
}

// LWDownAirBounds are the bounds of LWDownAir, W/m2.
func LWDownAirBounds(airC float64, l *rules.Limits) (lo, hi float64) {
	bb := blackBody(airC + sensor.ZeroCelsiusK)
	return l.LWAirDownFactor * bb, bb + l.LWAirDownAboveWm2
}

// LWUpAir tests longwave from the ground against the air temperature.
//
//	sigma*(Ta-15)^4 < Lu < sigma*(Ta+25)^4
//
// W/m2, Ta in kelvin. Source: Long & Dutton 2002 (from memory). Worked value: Ta 273.15: 251.83 to 448.08. A desert's ground goes beyond it.
func LWUpAir(lu, airC float64, l *rules.Limits) rules.Outcome {
	if math.IsNaN(lu) {
		return rules.NoValue
	}
	if !AirUsable(airC, l) {
		return rules.NoWeather
	}
	lo, hi := LWUpAirBounds(airC, l)
	if lu <= lo || lu >= hi {
		return rules.Miss
	}
	return rules.Pass
}

// LWUpAirBounds are the bounds of LWUpAir, W/m2.
func LWUpAirBounds(airC float64, l *rules.Limits) (lo, hi float64) {
	t := airC + sensor.ZeroCelsiusK
	return blackBody(t - l.LWAirUpBelowK), blackBody(t + l.LWAirUpAboveK)
}

// LWPair tests longwave down against up.
//
//	Lu - 300 < Ld < Lu + 25
//
// W/m2. Source: Long & Dutton 2002 (from memory). Not applicable without both.
func LWPair(ld, lu float64, l *rules.Limits) rules.Outcome {
	if math.IsNaN(ld) {
		return rules.NoValue
	}
	if math.IsNaN(lu) {
		return rules.NoPartner
	}
	if ld <= lu-l.LWPairBelowWm2 || ld >= lu+l.LWPairAboveWm2 {
		return rules.Miss
	}
	return rules.Pass
}
