package sensor

import (
	"fmt"
	"math"
)

const (
	// OffsetMinutesMin is how many night minutes a fit needs: some hundred, clear and cloudy.
	OffsetMinutesMin = 300
	// offsetSpreadMinWm2 is the standard deviation of net infrared below which the nights do not
	// hold clear and cloudy sky both, and slope and intercept cannot be told apart.
	offsetSpreadMinWm2 = 8.0
)

// ThermalOffset is the dark signal of a pyranometer as a function of the infrared exchange beside it:
// offset = B0 + B1 NetIR + B2 sigma (Td^4 - Tc^4), all in W m-2; NetIR = U/C of the pyrgeometer,
// negative under a clear sky.
//
// Source: Dutton et al. 2001, J. Atmos. Oceanic Technol. 18, 297. Day and night differ in
// instruments without ventilation (Sanchez et al. 2015, JTECH 32, 234): apply by day with that in mind.
type ThermalOffset struct {
	B0, B1, B2    float64
	ResidualSDWm2 float64
	Minutes       int
}

// FitThermalOffset fits the night's signal of a pyranometer by least squares.
//
// Inputs: minutes with the sun well below the horizon (zenith above 100 degrees), of equal length;
// domeWm2 is sigma (Td^4 - Tc^4) and nil for the form without it. A minute with a value that is not finite
// is left out. Refused with a reason: fewer than OffsetMinutesMin minutes, or too little spread of
// the infrared to find a slope.
func FitThermalOffset(nightWm2, netInfraredWm2, domeWm2 []float64) (ThermalOffset, error) {
	if len(netInfraredWm2) != len(nightWm2) || (domeWm2 != nil && len(domeWm2) != len(nightWm2)) {
		return ThermalOffset{}, fmt.Errorf("thermal offset: lengths differ: %d signals, %d net infrared, %d dome terms: give one of each a minute",
			len(nightWm2), len(netInfraredWm2), len(domeWm2))
	}
	at := func(i int) (y, x1, x2 float64, ok bool) {
		y, x1 = nightWm2[i], netInfraredWm2[i]
		if domeWm2 != nil {
			x2 = domeWm2[i]
		}
		sum := y + x1 + x2
		return y, x1, x2, sum-sum == 0
	}
	n, my, m1, m2 := 0, 0.0, 0.0, 0.0
	for i := range nightWm2 {
		if y, x1, x2, ok := at(i); ok {
			n++
			my, m1, m2 = my+y, m1+x1, m2+x2
		}
	}
	if n < OffsetMinutesMin {
		return ThermalOffset{}, fmt.Errorf("thermal offset: %d usable night minutes, %d needed: add nights", n, OffsetMinutesMin)
	}
	my, m1, m2 = my/float64(n), m1/float64(n), m2/float64(n)
	var syy, s11, s22, s12, s1y, s2y float64
	for i := range nightWm2 {
		if y, x1, x2, ok := at(i); ok {
			y, x1, x2 = y-my, x1-m1, x2-m2
			syy += float64(y * y)
			s11 += float64(x1 * x1)
			s22 += float64(x2 * x2)
			s12 += float64(x1 * x2)
			s1y += float64(x1 * y)
			s2y += float64(x2 * y)
		}
	}
	if sd := math.Sqrt(s11 / float64(n)); sd < offsetSpreadMinWm2 {
		return ThermalOffset{}, fmt.Errorf("thermal offset: net infrared varies by %.1f W m-2 only, %v needed: add clear and cloudy nights", sd, offsetSpreadMinWm2)
	}
	f := ThermalOffset{Minutes: n}
	det := float64(s11*s22) - float64(s12*s12)
	if det > 1e-6*s11*s22 { // the dome term varies, and not only along with net infrared
		f.B1 = (float64(s1y*s22) - float64(s2y*s12)) / det
		f.B2 = (float64(s2y*s11) - float64(s1y*s12)) / det
	} else {
		f.B1 = s1y / s11
	}
	f.B0 = my - float64(f.B1*m1) - float64(f.B2*m2)
	residual := syy - float64(f.B1*s1y) - float64(f.B2*s2y)
	f.ResidualSDWm2 = math.Sqrt(math.Max(0, residual) / float64(n-3))
	return f, nil
}

// OffsetAt returns the offset in W m-2 for a minute's net infrared and dome term (0 where the fit
// had none), both in W m-2.
func (f ThermalOffset) OffsetAt(netInfraredWm2, domeWm2 float64) float64 {
	return f.B0 + float64(f.B1*netInfraredWm2) + float64(f.B2*domeWm2)
}

// Correct returns a measured irradiance in W m-2 less its offset.
func (f ThermalOffset) Correct(measuredWm2, netInfraredWm2, domeWm2 float64) float64 {
	return measuredWm2 - f.OffsetAt(netInfraredWm2, domeWm2)
}

// Plausible reports whether the coefficients are those of a pyranometer: |B0| below 2 W m-2, B1 from
// -0.01 to 0.1 (black detectors 0.01 to 0.09, black-and-white ones near 0). Outside, look
// for a leak of light, a wrong sign or a wrong unit first.
func (f ThermalOffset) Plausible() bool {
	return math.Abs(f.B0) < 2 && f.B1 > -0.01 && f.B1 < 0.1
}
