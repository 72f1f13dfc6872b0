package sky

import (
	"math"

	"fluxwarden/qc/exact"
)

// Saturation vapour pressures in hPa from temperature in C. Formulae differ by up to 0.3 per cent at
// 20 C: name the one you use. Outside its range each returns NaN.

// SaturationWater is the form of the WMO guide (WMO-No. 8, annex 4.B): 6.112 exp(17.62 t/(243.12+t)) over
// water, -45..60 C. Relative humidity is counted over water at all temperatures (WMO).
// Worked value: 23.3260 at 20 C (not 23.39, which is IAPWS).
func SaturationWater(temperatureC float64) float64 {
	if !within(temperatureC, -45, 60) {
		return math.NaN()
	}
	return magnus(temperatureC, 6.112, 17.62, 243.12)
}

// SaturationIce is the WMO form over ice: 6.112 exp(22.46 t/(272.62+t)), -65..0 C.
func SaturationIce(temperatureC float64) float64 {
	if !within(temperatureC, -65, 0) {
		return math.NaN()
	}
	return magnus(temperatureC, 6.112, 22.46, 272.62)
}

// SaturationAlduchovEskridge: 6.1094 exp(17.625 t/(243.04+t)), -40..50 C (J. Appl. Meteorol. 35, 1996, 601).
func SaturationAlduchovEskridge(temperatureC float64) float64 {
	if !within(temperatureC, -40, 50) {
		return math.NaN()
	}
	return magnus(temperatureC, 6.1094, 17.625, 243.04)
}

// SaturationBuck1981: 6.1121 exp(17.502 t/(240.97+t)), -40..50 C (J. Appl. Meteorol. 20, 1527).
func SaturationBuck1981(temperatureC float64) float64 {
	if !within(temperatureC, -40, 50) {
		return math.NaN()
	}
	return magnus(temperatureC, 6.1121, 17.502, 240.97)
}

// SaturationBuck1996: 6.1121 exp((18.678 - t/234.5)(t/(257.14+t))), -80..50 C.
func SaturationBuck1996(temperatureC float64) float64 {
	if !within(temperatureC, -80, 50) {
		return math.NaN()
	}
	t := temperatureC
	return float64(6.1121 * exact.Exp(float64((18.678-t/234.5)*(t/(257.14+t)))))
}

// SaturationSonntag: ln e = -6096.9385/T + 16.635794 - 2.711193e-2 T + 1.673952e-5 T^2 + 2.433502 ln T,
// T in K, -100..100 C (Sonntag 1990, Z. Meteorol. 70, 340).
func SaturationSonntag(temperatureC float64) float64 {
	if !within(temperatureC, -100, 100) {
		return math.NaN()
	}
	k := temperatureC + 273.15
	return exact.Exp(-6096.9385/k + 16.635794 - float64(2.711193e-2*k) + float64(1.673952e-5*k*k) + float64(2.433502*exact.Log(k)))
}

func magnus(t, e0, a, b float64) float64 {
	return float64(e0 * exact.Exp(float64(a*t)/(b+t)))
}

// EnhancementFactor is what moist air adds to the pure vapour's pressure: 1.0016 + 3.15e-6 P - 0.074/P,
// P in hPa, 300..1100, else NaN (WMO-No. 8, annex 4.B, from memory). Worked value: 1.004719 at 1013.25.
func EnhancementFactor(pressureHPa float64) float64 {
	if !within(pressureHPa, 300, 1100) {
		return math.NaN()
	}
	return 1.0016 + float64(3.15e-6*pressureHPa) - 0.074/pressureHPa
}

// VapourPressure returns e in hPa from temperature in C and relative humidity in per cent over water,
// 0..105 (sensors read a little over 100 in fog); outside, NaN.
func VapourPressure(temperatureC, humidityPct float64) float64 {
	if !within(humidityPct, 0, 105) {
		return math.NaN()
	}
	return float64(humidityPct/100) * SaturationWater(temperatureC)
}

// DewPoint returns the dew point in C for a vapour pressure in hPa, the inverse of SaturationWater:
// 243.12 g/(17.62-g), g = ln(e/6.112). Below 0.01 or above 200 hPa: NaN.
// Worked value: 9.255175 C at 20 C and 50 per cent.
func DewPoint(vapourHPa float64) float64 {
	if !within(vapourHPa, 0.01, 200) {
		return math.NaN()
	}
	g := exact.Log(vapourHPa / 6.112)
	return float64(243.12*g) / (17.62 - g)
}

// PrecipitableWater returns the column's water in cm from temperature in C (-50..60) and relative
// humidity in per cent (0..105) at the surface; outside, NaN. Good to 20 per cent; never below 0.1 cm.
//
// Source: Gueymard 1994, Solar Energy 53, 57, eq. 1 to 4; Keogh and Blakers 2004.
// Worked value: 1.867349 cm at 20 C, 50 per cent.
func PrecipitableWater(temperatureC, humidityPct float64) float64 {
	if !within(temperatureC, -50, 60) || !within(humidityPct, 0, 105) {
		return math.NaN()
	}
	k := temperatureC + 273.15
	theta := k / 273.15
	scaleHeightKm := 0.4976 + float64(1.5265*theta) + exact.Exp(float64(13.6897*theta)-float64(14.9188*theta*theta*theta))
	h := k / 100
	saturation := exact.Exp(22.330 - 49.140/h - 10.922/float64(h*h) - float64(0.39015*h))
	densityGm3 := float64(216.7*(humidityPct/100)*saturation) / k
	return math.Max(0.1, float64(0.1*scaleHeightKm*densityGm3))
}
