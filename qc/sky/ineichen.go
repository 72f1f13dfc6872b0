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
	site := NewIneichenSite(in.LinkeTurbidity, in.ElevationM)
	out, ok := site.At(in.CosZenith, in.AirMass, in.ExtraterrestrialWm2)
	if ok && in.PerezFactor && in.CosZenith > 0 {
		out.GlobalWm2 = float64(out.GlobalWm2 * exact.Exp(float64(0.01*exact.Pow(in.AirMass, 1.8))))
		out = site.split(out.GlobalWm2, in.CosZenith, in.AirMass, in.ExtraterrestrialWm2)
	}
	return out, ok
}

// IneichenSite is what IneichenPerez needs of a place and its turbidity, worked out once for many minutes.
type IneichenSite struct {
	global, globalDepth, direct, directDepth, share float64
}

// NewIneichenSite takes the Linke turbidity (1..15) and the elevation in metres (-430..9000); it does not check them.
func NewIneichenSite(linkeTurbidity, elevationM float64) IneichenSite {
	fh1 := exact.Exp(-elevationM / 8000)
	fh2 := exact.Exp(-elevationM / 1250)
	cg2 := float64(3.92e-5*elevationM) + 0.0387
	return IneichenSite{
		global:      float64(5.09e-5*elevationM) + 0.868,
		globalDepth: float64(-cg2 * (fh1 + float64(fh2*(linkeTurbidity-1)))),
		direct:      0.664 + 0.163/fh1,
		directDepth: float64(-0.09 * (linkeTurbidity - 1)),
		share:       1 - (0.1-float64(0.2*exact.Exp(-linkeTurbidity)))/(0.1+0.882/fh1),
	}
}

// At returns the cloudless irradiance as IneichenPerez does, for the cosine of the apparent zenith, the pressure-corrected air mass
// (0.3..45) and the extraterrestrial normal irradiance in W m-2.
func (s *IneichenSite) At(cosZenith, airMass, extraterrestrialWm2 float64) (Irradiance, bool) {
	if cosZenith <= 0 {
		return Irradiance{}, true
	}
	if !within(airMass, 0.3, 45) {
		return Irradiance{}, false
	}
	global := float64(s.global * extraterrestrialWm2 * cosZenith * exact.Exp(float64(s.globalDepth*airMass)))
	return s.split(global, cosZenith, airMass, extraterrestrialWm2), true
}

// split takes the beam out of global.
func (s *IneichenSite) split(global, cosZenith, airMass, extraterrestrialWm2 float64) Irradiance {
	direct := float64(s.direct * extraterrestrialWm2 * exact.Exp(float64(s.directDepth*airMass)))
	direct = math.Min(direct, float64(global*s.share)/cosZenith)
	beam := float64(direct * cosZenith)
	return Irradiance{GlobalWm2: global, DirectWm2: direct, DiffuseWm2: global - beam}
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
