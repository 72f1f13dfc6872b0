package sky

import (
	"math"

	"fluxwarden/qc/exact"
)

// IneichenInput is the state of sky and place for IneichenPerez.
type IneichenInput struct {
	CosZenith           float64 // of the apparent sun; 0 or less is night
	AirMass             float64 // pressure-corrected, 0.3..45
	LinkeTurbidity      float64 // at air mass 2, 1..15
	ElevationM          float64 // -430..9000
	ExtraterrestrialWm2 float64
	// PerezFactor multiplies global by exp(0.01 AM^1.8), as the companion paper (Perez et al. 2002, Solar Energy
	// 73, 311) prints: 3.5 % at air mass 2, and it grows without bound. Off by default.
	PerezFactor bool
}

// IneichenPerez returns the cloudless irradiance from the Linke turbidity.
//
// Source: Ineichen and Perez 2002, Solar Energy 73, 151-157, eq. 4 to 8, with the product
// fh2 (TL-1) that the printed equation for global lost.
// Night gives zeros and ok; inputs outside their ranges, ok = false.
// Worked value: 1038.159219, 942.208186, 110.265293 at zenith 10, AM 1, TL 3, sea level, 1364 W m-2.
func IneichenPerez(in IneichenInput) (Irradiance, bool) {
	if !(within(in.LinkeTurbidity, 1, 15) && within(in.ElevationM, -430, 9000) &&
		within(in.ExtraterrestrialWm2, 0, 2000) && within(in.CosZenith, -1, 1)) {
		return Irradiance{}, false
	}
	if in.CosZenith <= 0 {
		return Irradiance{}, true
	}
	if !within(in.AirMass, 0.3, 45) {
		return Irradiance{}, false
	}
	tl, am := in.LinkeTurbidity, in.AirMass
	fh1 := exact.Exp(-in.ElevationM / 8000)
	fh2 := exact.Exp(-in.ElevationM / 1250)
	cg1 := float64(5.09e-5*in.ElevationM) + 0.868
	cg2 := float64(3.92e-5*in.ElevationM) + 0.0387
	global := float64(cg1 * in.ExtraterrestrialWm2 * in.CosZenith *
		exact.Exp(float64(-cg2*am*(fh1+float64(fh2*(tl-1))))))
	if in.PerezFactor {
		global = float64(global * exact.Exp(float64(0.01*exact.Pow(am, 1.8))))
	}
	b := 0.664 + 0.163/fh1
	direct := float64(b * in.ExtraterrestrialWm2 * exact.Exp(float64(-0.09*am*(tl-1))))
	limit := float64(global*(1-(0.1-float64(0.2*exact.Exp(-tl)))/(0.1+0.882/fh1))) / in.CosZenith
	direct = math.Min(direct, limit)
	beam := float64(direct * in.CosZenith)
	return Irradiance{GlobalWm2: global, DirectWm2: direct, DiffuseWm2: global - beam}, true
}

// LinkeTurbidity returns the Linke turbidity that gives a measured cloudless direct normal irradiance,
// 1 + 11.1 ln(b E0/B)/AM (same source); NaN for values that are not positive. Best near air mass 2.
// Worked value: 2.894840 from 800 W m-2 at AM 2, sea level, 1361 W m-2.
func LinkeTurbidity(directWm2, airMass, elevationM, extraterrestrialWm2 float64) float64 {
	if !(directWm2 > 0 && airMass > 0 && extraterrestrialWm2 > 0) {
		return math.NaN()
	}
	b := 0.664 + float64(0.163*exact.Exp(elevationM/8000))
	return 1 + float64(11.1*exact.Log(float64(b*extraterrestrialWm2)/directWm2))/airMass
}
