package sky

import "math"

const (
	rayleighCosZenithMin = 0.05
	rayleighPressureMin  = 300.0
	rayleighPressureMax  = 1100.0
)

// RayleighLimit returns the diffuse irradiance in W m-2 that the air's molecules alone scatter: measured
// diffuse under a clear sky cannot lie below it, unless the thermal offset is not corrected or the shade
// hides more than the sun.
//
// Inputs: cosine of the zenith angle 0.05..1 (below, the fit means nothing: NaN), pressure 300..1100
// hPa (else NaN). Source: Long and Shi 2008, Open Atmos. Sci. J. 2, 23 (from memory):
// 209.3 mu - 708.3 mu^2 + 1128.7 mu^3 - 911.2 mu^4 + 287.85 mu^5 + 0.046725 mu P.
// For the mean distance of the sun; divide by R^2 for the day's. Worked value: 44.0703 at 0.5, 1000 hPa.
func RayleighLimit(cosZenith, pressureHPa float64) float64 {
	if !within(cosZenith, rayleighCosZenithMin, 1) || !within(pressureHPa, rayleighPressureMin, rayleighPressureMax) {
		return math.NaN()
	}
	mu := cosZenith
	p := 209.3 + float64(mu*(-708.3+float64(mu*(1128.7+float64(mu*(-911.2+float64(mu*287.85)))))))
	return float64(mu * (p + float64(0.046725*pressureHPa)))
}

// OvercastMinimum returns the lowest global irradiance in W m-2 seen under heavy overcast, after the
// thermal offset is corrected. Input: zenith angle 0..90 degrees, else NaN.
// Source: Nollas, Salazar and Gueymard 2023, Renewable Energy, doi 10.1016/j.renene.2022.11.056 (from
// memory). Worked value: 1.9560 at 60 degrees.
func OvercastMinimum(zenithDeg float64) float64 {
	if !within(zenithDeg, 0, 90) {
		return math.NaN()
	}
	z := zenithDeg
	return (6.5331 - float64(0.065502*z) + float64(1.8312e-4*z*z)) / (1 + float64(0.01113*z))
}
