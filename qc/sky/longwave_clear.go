package sky

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/sensor"
)

// The two functions of one variable that LongwaveClear rests on, tabulated: within 1e-6 of themselves, which a test holds.
var (
	saturationCurve = exact.NewCurve(saturationLowC, 60, 210, SaturationWater)
	prataCurve      = exact.NewCurve(1, 12, 440, func(u float64) float64 { // of u = sqrt(1.2 + 3 w)
		return 1 - float64((1+(float64(u*u)-1.2)/3)*exact.Exp(-u))
	})
)

const saturationLowC = -45

// LongwaveClear is LongwavePrata for air temperature in degrees C (-45..60) and relative humidity in per cent over water (0..105), fast
// enough for every minute; outside, and for more than 100 hPa of vapour, NaN.
func LongwaveClear(airC, humidityPct float64) float64 {
	if !(humidityPct >= 0 && humidityPct <= 105) {
		return math.NaN()
	}
	airK := airC + sensor.ZeroCelsiusK
	vapour := float64(humidityPct/100) * saturationCurve.At(airC)
	if !(vapour >= 1e-3 && vapour <= 100) { // as in longwaveValid
		return math.NaN()
	}
	w := float64(46.5*vapour) / airK
	return float64(prataCurve.At(math.Sqrt(1.2+float64(3*w))) * sensor.BlackbodyFlux(airK))
}
