package sensor

import (
	"math"

	"fluxwarden/qc/exact"
)

// secondRadiationConstant is hc/k in m K (CODATA 2018, exact by definition).
const secondRadiationConstant = 0.014387768775

// PlanckFraction returns the part of a black body's emission at wavelengths shorter than a limit: how much of the sun's
// or the sky's radiation a dome lets through.
//
// Inputs: wavelength in micrometres and temperature in K, both positive; else NaN. Output 0..1.
// Source: Planck's law integrated as a series, (15/pi^4) sum of exp(-n x)/n (x^3 + 3 x^2/n + 6 x/n^2 + 6/n^3),
// x = hc/(k lambda T). Summed until the terms vanish; below x = 0.01 the complement's leading term is used.
// Worked value: 0.122245 below 0.4 um at 5778 K.
func PlanckFraction(wavelengthUm, temperatureK float64) float64 {
	if !(wavelengthUm > 0 && temperatureK > 0) {
		return math.NaN()
	}
	x := secondRadiationConstant * 1e6 / (wavelengthUm * temperatureK)
	const scale = 15 / (math.Pi * math.Pi * math.Pi * math.Pi)
	if x < 0.01 { // 1 - scale (x^3/3 - x^4/8 + ...)
		return 1 - float64(scale*x*x*x*(1.0/3-float64(x/8)))
	}
	sum := 0.0
	for n := 1.0; n <= 4000; n++ {
		term := float64(exact.Exp(float64(-n*x)) / n * (float64(x*x*x) + float64(3*x*x)/n + float64(6*x)/float64(n*n) + 6/float64(n*n*n)))
		sum += term
		if term < 1e-17 {
			break
		}
	}
	return math.Min(1, float64(scale*sum))
}
