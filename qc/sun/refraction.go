package sun

import (
	"math"

	"fluxwarden/qc/exact"
)

const (
	sunRadiusDeg           = 0.26667
	horizonRefractionDeg   = 0.5667
	standardPressureHPa    = 1013.25
	KoppLeanSolarConstant  = 1360.8 // W m-2 at 1 AU, ± 0.5: Kopp and Lean 2011, GRL 38, L01706
	extremeRefractionLimit = -(sunRadiusDeg + horizonRefractionDeg)
)

// Refraction returns how much the atmosphere lifts the sun, in degrees.
//
// Inputs: airless elevation in degrees, pressure in hPa, temperature in C.
// Source: Reda and Andreas, eq. 42 (after Meeus, from Saemundsson).
// Validity: while any of the disc can be seen, that is elevation >= -0.83337 degrees; below
// it the result is 0. Worked value: 0.016332 at 39.872046 degrees, 820 hPa, 11 C.
func Refraction(elevationDeg, pressureHPa, temperatureC float64) float64 {
	if elevationDeg < extremeRefractionLimit {
		return 0
	}
	tan := tanDeg(elevationDeg + 10.3/(elevationDeg+5.11))
	return float64(pressureHPa/1010*(283/(273+temperatureC))) * 1.02 / (60 * tan)
}

// ApparentZenith returns the refracted zenith angle for an airless one, both in degrees.
// It serves where the beam meets a plane: at 85 degrees the airless cosine is 3 % wrong.
func ApparentZenith(zenithDeg, pressureHPa, temperatureC float64) float64 {
	return zenithDeg - Refraction(90-zenithDeg, pressureHPa, temperatureC)
}

// IncidenceCos returns the cosine of the angle between the sun and the normal of a plane.
//
// Inputs, in degrees: zenith angle of the sun (apparent, for a beam that is measured), its
// azimuth from north clockwise, the plane's tilt from the horizontal (0..180) and the azimuth its
// normal faces. The result is negative while the sun is behind the plane.
// Source: Iqbal 1983; Reda and Andreas, eq. 47, with the plane's azimuth counted from north.
func IncidenceCos(zenithDeg, azimuthDeg, tiltDeg, planeAzimuthDeg float64) float64 {
	sinZ, cosZ := sincosDeg(zenithDeg)
	sinT, cosT := sincosDeg(tiltDeg)
	c := float64(cosZ*cosT) + float64(sinT*sinZ*cosDeg(azimuthDeg-planeAzimuthDeg))
	return math.Max(-1, math.Min(1, c))
}

// IncidenceDeg returns the angle of IncidenceCos in degrees, 0..180.
func IncidenceDeg(zenithDeg, azimuthDeg, tiltDeg, planeAzimuthDeg float64) float64 {
	return float64(exact.Acos(IncidenceCos(zenithDeg, azimuthDeg, tiltDeg, planeAzimuthDeg)) * degPerRad)
}

// ExtraterrestrialNormal returns the irradiance of the sun outside the atmosphere on a
// plane facing it, in W m-2: the solar constant (W m-2 at 1 AU; zero or less means
// KoppLeanSolarConstant) over the distance in AU squared.
func ExtraterrestrialNormal(solarConstantWm2, distanceAU float64) float64 {
	if solarConstantWm2 <= 0 {
		solarConstantWm2 = KoppLeanSolarConstant
	}
	return solarConstantWm2 / (distanceAU * distanceAU)
}
