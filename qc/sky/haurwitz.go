package sky

import "fluxwarden/qc/exact"

// Haurwitz returns cloudless global irradiance in W m-2 from the sun's height alone:
// 1098 mu0 exp(-0.059/mu0); 0 at night.
//
// Input: cosine of the zenith angle, -1..1. Source: Haurwitz 1945, J. Meteorol. 2, 154 (some papers quote
// -0.057). A rough sky, some 5 to 10 per cent. Worked value: 487.8941 at zenith 60.
func Haurwitz(cosZenith float64) float64 {
	if !(cosZenith > 0) {
		return 0
	}
	return float64(1098 * cosZenith * exact.Exp(-0.059/cosZenith))
}
