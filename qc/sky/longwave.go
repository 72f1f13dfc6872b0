package sky

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/sensor"
)

// The cloudless downward longwave in W m-2 from air temperature (170..350 K) and vapour pressure
// (0.001..100 hPa) at the station; outside, NaN. All coefficients from memory of the sources unless
// said otherwise. The formulae differ by 20 to 45 W m-2 among themselves: a soft band, to be calibrated on
// the site's own clear nights. Brunt and Brutsaert are low in cold dry air.

func longwaveValid(airK, vapourHPa float64) bool {
	return within(airK, 170, 350) && within(vapourHPa, 1e-3, 100)
}

// LongwaveBrunt: (0.52 + 0.065 sqrt(e)) sigma T^4. Brunt 1932, QJRMS 58, 389.
// Worked value: 283.630 at 288.15 K, 10 hPa.
func LongwaveBrunt(airK, vapourHPa float64) float64 {
	return longwave(airK, vapourHPa, 0.52+float64(0.065*math.Sqrt(vapourHPa)))
}

// LongwaveBrutsaert: 1.24 (e/T)^(1/7) sigma T^4. Brutsaert 1975, Water Resour. Res. 11, 742.
// Worked value: 299.910 at 288.15 K, 10 hPa.
func LongwaveBrutsaert(airK, vapourHPa float64) float64 {
	if !longwaveValid(airK, vapourHPa) {
		return math.NaN()
	}
	return longwave(airK, vapourHPa, float64(1.24*exact.Pow(vapourHPa/airK, 1.0/7)))
}

// LongwaveIdso: (0.70 + 5.95e-5 e exp(1500/T)) sigma T^4. Idso 1981, Water Resour. Res. 17, 295.
// Worked value: 316.044 at 288.15 K, 10 hPa.
func LongwaveIdso(airK, vapourHPa float64) float64 {
	if !longwaveValid(airK, vapourHPa) {
		return math.NaN()
	}
	return longwave(airK, vapourHPa, 0.70+float64(5.95e-5*vapourHPa*exact.Exp(1500/airK)))
}

// LongwavePrata: (1 - (1+w) exp(-sqrt(1.2 + 3 w))) sigma T^4, w = 46.5 e/T in cm.
// Prata 1996, QJRMS 122, 1127. Worked value: 303.440 at 288.15 K, 10 hPa.
func LongwavePrata(airK, vapourHPa float64) float64 {
	if !longwaveValid(airK, vapourHPa) {
		return math.NaN()
	}
	w := float64(46.5*vapourHPa) / airK
	return longwave(airK, vapourHPa, 1-float64((1+w)*exact.Exp(-math.Sqrt(1.2+float64(3*w)))))
}

// LongwaveDilley: 59.38 + 113.7 (T/273.16)^6 + 96.96 sqrt(w/25), w = 465 e/T in kg m-2.
// Dilley and O'Brien 1998, QJRMS 124, 1391, model B; coefficients seen alike in several
// public uses. Worked value: 293.945 at 288.15 K, 10 hPa.
func LongwaveDilley(airK, vapourHPa float64) float64 {
	if !longwaveValid(airK, vapourHPa) {
		return math.NaN()
	}
	t := airK / 273.16
	t3 := float64(t * t * t)
	w := float64(465*vapourHPa) / airK
	return 59.38 + float64(113.7*t3*t3) + float64(96.96*math.Sqrt(w/25))
}

func longwave(airK, vapourHPa, emissivity float64) float64 {
	if !longwaveValid(airK, vapourHPa) {
		return math.NaN()
	}
	return float64(emissivity * sensor.BlackbodyFlux(airK))
}
