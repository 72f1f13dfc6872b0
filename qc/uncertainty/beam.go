package uncertainty

import "math"

// beamMuMin is the cosine of the zenith angle under which the split of global says nothing of the beam.
const beamMuMin = 0.05

// BeamOfGlobal estimates the direct normal irradiance in W/m2 where only global (W/m2) is measured, from the cosine of the zenith angle
// and the extraterrestrial irradiance normal to the beam, W/m2: what Erbs et al. 1982 (Solar Energy 28, 293; from memory) leave of global
// after the diffuse part, on the plane of the beam,
//
//	kd = 1 - 0.09 kt                                                       kt <= 0.22
//	kd = 0.9511 - 0.1604 kt + 4.388 kt^2 - 16.638 kt^3 + 12.336 kt^4         kt <= 0.80
//	kd = 0.165                                                             above
//
// at most the extraterrestrial one; 0 for a cosine under 0.05 and for a global that is not above nothing. The fit is of hours; it is
// used for an uncertainty only. Worked value: kt 0.7 gives kd 0.243980.
func BeamOfGlobal(globalWm2, cosZenith, extraterrestrialWm2 float64) float64 {
	if !(cosZenith >= beamMuMin && globalWm2 > 0 && extraterrestrialWm2 > 0) {
		return 0
	}
	return math.Min(globalWm2*(1-erbsDiffuseShare(globalWm2/(cosZenith*extraterrestrialWm2)))/cosZenith, extraterrestrialWm2)
}

func erbsDiffuseShare(kt float64) float64 {
	switch {
	case kt <= 0.22:
		return 1 - float64(0.09*kt)
	case kt <= 0.80:
		return 0.9511 + float64(kt*(-0.1604+float64(kt*(4.388+float64(kt*(-16.638+float64(kt*12.336)))))))
	default:
		return 0.165
	}
}

// BeamAtMost is the beam that a cloudless sky may give, W/m2, where nothing of the sun is measured: 0.8 of the extraterrestrial one (own
// choice), 0 for a cosine under 0.05.
func BeamAtMost(cosZenith, extraterrestrialWm2 float64) float64 {
	if !(cosZenith >= beamMuMin) {
		return 0
	}
	return 0.8 * extraterrestrialWm2
}
