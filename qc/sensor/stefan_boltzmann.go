package sensor

import "math"

// StefanBoltzmann is 2 pi^5 k^4 / (15 h^3 c^2) in W m-2 K-4 (CODATA 2018 and 2022; exact by the
// definitions of k, h and c, rounded to ten digits). Older documents use 5.67e-8, which gives 0.03
// W m-2 less at 300 K.
const StefanBoltzmann = 5.670374419e-8

// BlackbodyFlux returns the hemispherical emission of a black body in W m-2.
// Input: temperature in K, 0 or more; below it NaN. Worked value: 390.918508 at 288.15 K.
func BlackbodyFlux(temperatureK float64) float64 {
	if !(temperatureK >= 0) {
		return math.NaN()
	}
	t2 := float64(temperatureK * temperatureK)
	return float64(StefanBoltzmann * t2 * t2)
}

// BlackbodyTemperature returns the temperature in K of a black body that emits a flux in
// W m-2; NaN for a negative flux.
func BlackbodyTemperature(fluxWm2 float64) float64 {
	if !(fluxWm2 >= 0) {
		return math.NaN()
	}
	return math.Sqrt(math.Sqrt(fluxWm2 / StefanBoltzmann))
}
