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

// OffsetSums is what a fit needs to know of night minutes: their number, sums and sums of products. Sums of several nights add up. With values
// that are multiples of 1/64 W/m2, as OffsetStep makes them, the sums are exact, so that their order does not matter.
type OffsetSums struct {
	N   int     `json:"n"`
	Y   float64 `json:"y"`  // the pyranometer
	X1  float64 `json:"x1"` // net infrared
	X2  float64 `json:"x2"` // the dome's term
	YY  float64 `json:"yy"`
	X11 float64 `json:"x11"`
	X22 float64 `json:"x22"`
	X12 float64 `json:"x12"`
	X1Y float64 `json:"x1y"`
	X2Y float64 `json:"x2y"`
}

// Add takes a minute: the pyranometer's value, net infrared and the dome's term (0 without a dome temperature), W/m2. One with a
// value that is not finite is left out.
func (s *OffsetSums) Add(y, x1, x2 float64) {
	if sum := y + x1 + x2; sum-sum != 0 {
		return
	}
	s.N++
	s.Y, s.X1, s.X2 = s.Y+y, s.X1+x1, s.X2+x2
	s.YY += float64(y * y)
	s.X11 += float64(x1 * x1)
	s.X22 += float64(x2 * x2)
	s.X12 += float64(x1 * x2)
	s.X1Y += float64(x1 * y)
	s.X2Y += float64(x2 * y)
}

// Merge adds the minutes of another night.
func (s *OffsetSums) Merge(o *OffsetSums) {
	s.N += o.N
	s.Y, s.X1, s.X2, s.YY = s.Y+o.Y, s.X1+o.X1, s.X2+o.X2, s.YY+o.YY
	s.X11, s.X22, s.X12, s.X1Y, s.X2Y = s.X11+o.X11, s.X22+o.X22, s.X12+o.X12, s.X1Y+o.X1Y, s.X2Y+o.X2Y
}

// Fit gives the offset by least squares, without the dome's term where that does not vary on its own. Refused with a reason: fewer than
// OffsetMinutesMin minutes, or too little spread of the infrared to find a slope.
func (s *OffsetSums) Fit() (ThermalOffset, error) {
	if s.N < OffsetMinutesMin {
		return ThermalOffset{}, fmt.Errorf("thermal offset: %d usable night minutes, %d needed: add nights", s.N, OffsetMinutesMin)
	}
	n := float64(s.N)
	my, m1, m2 := s.Y/n, s.X1/n, s.X2/n
	about := func(sum, total, mean float64) float64 { return sum - float64(total*mean) }
	syy, s11, s22 := about(s.YY, s.Y, my), about(s.X11, s.X1, m1), about(s.X22, s.X2, m2)
	s12, s1y, s2y := about(s.X12, s.X1, m2), about(s.X1Y, s.X1, my), about(s.X2Y, s.X2, my)
	if sd := math.Sqrt(max(s11, 0) / n); sd < offsetSpreadMinWm2 {
		return ThermalOffset{}, fmt.Errorf("thermal offset: net infrared varies by %.1f W m-2 only, %v needed: add clear and cloudy nights", sd, offsetSpreadMinWm2)
	}
	f := ThermalOffset{Minutes: s.N}
	det := float64(s11*s22) - float64(s12*s12)
	if det > 1e-6*s11*s22 { // the dome term varies, and not only along with net infrared
		f.B1 = (float64(s1y*s22) - float64(s2y*s12)) / det
		f.B2 = (float64(s2y*s11) - float64(s1y*s12)) / det
	} else {
		f.B1 = s1y / s11
	}
	f.B0 = my - float64(f.B1*m1) - float64(f.B2*m2)
	residual := syy - float64(f.B1*s1y) - float64(f.B2*s2y)
	f.ResidualSDWm2 = math.Sqrt(math.Max(0, residual) / (n - 3))
	return f, nil
}

// FitThermalOffset fits the night's signal of a pyranometer by least squares.
//
// Inputs: minutes with the sun well below the horizon (zenith above 100 degrees), of equal length;
// domeWm2 is sigma (Td^4 - Tc^4) and nil for the form without it. A minute with a value that is not finite
// is left out. What is refused: see OffsetSums.Fit.
func FitThermalOffset(nightWm2, netInfraredWm2, domeWm2 []float64) (ThermalOffset, error) {
	if len(netInfraredWm2) != len(nightWm2) || (domeWm2 != nil && len(domeWm2) != len(nightWm2)) {
		return ThermalOffset{}, fmt.Errorf("thermal offset: lengths differ: %d signals, %d net infrared, %d dome terms: give one of each a minute",
			len(nightWm2), len(netInfraredWm2), len(domeWm2))
	}
	var s OffsetSums
	for i, y := range nightWm2 {
		dome := 0.0
		if domeWm2 != nil {
			dome = domeWm2[i]
		}
		s.Add(y, netInfraredWm2[i], dome)
	}
	return s.Fit()
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
