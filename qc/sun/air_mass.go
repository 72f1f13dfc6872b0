package sun

import (
	"math"

	"fluxwarden/qc/exact"
)

// AirMassKastenYoung returns the relative optical air mass at sea level.
//
// Input: apparent zenith angle in degrees, 0..90. Output: 1 at the zenith (0.999712 by the
// fit) to 37.92 at the horizon. Outside the range: NaN.
// Source: Kasten and Young 1989, Appl. Opt. 28, 4735, eq. 3.
func AirMassKastenYoung(apparentZenithDeg float64) float64 {
	if !(apparentZenithDeg >= 0 && apparentZenithDeg <= 90) {
		return math.NaN()
	}
	gamma := 90 - apparentZenithDeg
	return 1 / (cosDeg(apparentZenithDeg) + float64(0.50572*exact.Pow(gamma+6.07995, -1.6364)))
}

// AirMassKasten returns the relative optical air mass of Kasten 1966, which the Bird model
// uses. Input: zenith angle in degrees, 0..90. Outside the range: NaN.
// Source: Kasten 1966, Arch. Met. Geophys. Biokl. B14, 206.
func AirMassKasten(zenithDeg float64) float64 {
	if !(zenithDeg >= 0 && zenithDeg <= 90) {
		return math.NaN()
	}
	return 1 / (cosDeg(zenithDeg) + float64(0.15*exact.Pow(93.885-zenithDeg, -1.253)))
}

// AirMassAtPressure scales a relative air mass to the station's pressure in hPa.
func AirMassAtPressure(airMass, pressureHPa float64) float64 {
	return airMass * pressureHPa / standardPressureHPa
}
