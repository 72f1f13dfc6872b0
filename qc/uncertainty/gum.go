package uncertainty

import "math"

// Coverage factors: the standard uncertainty times this is the expanded one.
const (
	Coverage         = 2    // of what is stored as u95
	CoverageNormal95 = 1.96 // of a normal distribution at 95 %, as ASTM G213 uses it
)

// A Distribution is how a quantity is spread within its limits.
type Distribution uint8

const (
	Normal      Distribution = iota // limits are an expanded uncertainty, k=2
	Rectangular                     // anywhere within the limits
	Triangular                      // within the limits and more likely in the middle
	Measured                        // the limit is a standard uncertainty itself
)

func (d Distribution) String() string {
	return [...]string{"normal, k=2", "rectangular", "triangular", "measured"}[d]
}

// Standard gives the standard uncertainty of what lies within plus or minus a limit: half of it for an expanded uncertainty, a/sqrt(3) for
// a rectangular and a/sqrt(6) for a triangular distribution. Source: GUM, 4.3.
func (d Distribution) Standard(limit float64) float64 {
	switch d {
	case Normal:
		return limit / Coverage
	case Rectangular:
		return limit / math.Sqrt(3)
	case Triangular:
		return limit / math.Sqrt(6)
	default:
		return limit
	}
}

// Combine gives the combined standard uncertainty of independent contributions, each in the unit of the result: the root of the sum of
// their squares. Source: GUM, equation 10.
func Combine(contributions ...float64) float64 {
	sum := 0.0
	for _, u := range contributions {
		sum += float64(u * u)
	}
	return math.Sqrt(sum)
}

// An InfraredCorrected is the measurement equation of a pyranometer whose thermal exchange is taken out,
//
//	E = (V - Rnet Wnet) / R
//
// V in uV, R and Rnet in uV/(W/m2), Wnet (negative under a clear sky) and E in W/m2; R is above zero. Source: ASTM G213-17, from memory.
// Worked value: 1000.75 W/m2 for V 8000, R 8, Rnet 0.04, Wnet -150.
type InfraredCorrected struct{ VoltageUV, SensitivityUVPerWm2, NetSensitivityUVPerWm2, NetWm2 float64 }

// IrradianceWm2 is the equation's value.
func (m InfraredCorrected) IrradianceWm2() float64 {
	return (m.VoltageUV - float64(m.NetSensitivityUVPerWm2*m.NetWm2)) / m.SensitivityUVPerWm2
}

// Contributions gives what each input's standard uncertainty, in the input's unit, comes to in W/m2: the partial derivative times it, with
// its sign.
func (m InfraredCorrected) Contributions(standard InfraredCorrected) [4]float64 {
	r := m.SensitivityUVPerWm2
	return [4]float64{
		standard.VoltageUV / r,
		-m.IrradianceWm2() / r * standard.SensitivityUVPerWm2,
		-m.NetWm2 / r * standard.NetSensitivityUVPerWm2,
		-m.NetSensitivityUVPerWm2 / r * standard.NetWm2,
	}
}
