package sensor

import "math"

// IEC 60751:2008 and 2022, the standard curve of industrial platinum resistors (0.00385055 per K
// from 0 to 100 C). Curves of 0.0039 per K are another material: do not mix.
const (
	platinumA = 3.9083e-3
	platinumB = -5.775e-7
	platinumC = -4.183e-12

	platinumMinC = -200.0
	platinumMaxC = 850.0
)

// PlatinumOhm returns the resistance in ohm at a temperature in C, -200..850 (else NaN), of a
// resistor with r0 ohm at 0 C: r0 (1 + A t + B t^2 + C (t-100) t^3), the last term below 0 C only.
// Worked value: 138.5055 at 100 C for r0 = 100.
func PlatinumOhm(temperatureC, r0 float64) float64 {
	if !(temperatureC >= platinumMinC && temperatureC <= platinumMaxC) {
		return math.NaN()
	}
	return float64(r0 * platinumRatio(temperatureC))
}

func platinumRatio(t float64) float64 {
	r := 1 + float64(t*(platinumA+float64(platinumB*t)))
	if t < 0 {
		r += float64(platinumC * (t - 100) * t * t * t)
	}
	return r
}

// PlatinumC inverts PlatinumOhm. A resistance outside the curve (for 100 ohm below 18.52 or above
// 390.48) or r0 not positive gives NaN.
func PlatinumC(ohm, r0 float64) float64 {
	if !(r0 > 0) {
		return math.NaN()
	}
	ratio := ohm / r0
	if !(ratio >= platinumRatio(platinumMinC)-1e-12 && ratio <= platinumRatio(platinumMaxC)+1e-12) {
		return math.NaN()
	}
	discriminant := float64(platinumA*platinumA) - float64(4*platinumB*(1-ratio))
	t := (math.Sqrt(discriminant) - platinumA) / (2 * platinumB)
	if ratio >= 1 {
		return t
	}
	for range 6 { // Newton from within 3 K: four steps suffice
		slope := platinumA + float64(2*platinumB*t) + float64(platinumC*t*t*(float64(4*t)-300))
		t -= (platinumRatio(t) - ratio) / slope
	}
	return t
}
