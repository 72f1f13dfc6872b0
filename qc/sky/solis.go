package sky

import (
	"math"

	"fluxwarden/qc/exact"
)

// SolisInput is the state of the sky for Solis.
type SolisInput struct {
	ElevationDeg        float64 // of the apparent sun; 0 or less is night
	AOD700              float64 // aerosol optical depth at 700 nm, 0..0.45
	WaterCm             float64 // 0..10; below 0.2 it is taken as 0.2
	PressureHPa         float64 // 400..1100 (sites to 7000 m)
	ExtraterrestrialWm2 float64
}

const solisPressureHPa = 1013.25

// Solis returns the cloudless irradiance of the simplified Solis model. Its three parts are fitted
// apart, so global is not quite direct on the horizontal plus diffuse, and diffuse steps by some
// per cent at an aerosol depth of 0.05.
//
// Source: Ineichen 2008, Solar Energy 82, 758-762. Night gives zeros and ok; inputs outside their
// ranges, ok = false. Worked value: 1064.653145, 959.335463, 129.125602 at 80 degrees, aerosol 0.1,
// water 1 cm, sea level, 1364 W m-2.
func Solis(in SolisInput) (Irradiance, bool) {
	if !(within(in.ElevationDeg, -90, 90) && within(in.AOD700, 0, 0.45) && within(in.WaterCm, 0, 10) &&
		within(in.PressureHPa, 400, 1100) && within(in.ExtraterrestrialWm2, 0, 2000)) {
		return Irradiance{}, false
	}
	if in.ElevationDeg <= 0 {
		return Irradiance{}, true
	}
	a, w := in.AOD700, math.Max(in.WaterCm, 0.2)
	lw, lp := exact.Log(w), exact.Log(in.PressureHPa/solisPressureHPa)
	sinH := exact.Sin(float64(in.ElevationDeg * (math.Pi / 180)))
	enhanced := float64(in.ExtraterrestrialWm2 * (float64(0.12*exact.Pow(w, 0.56)*a*a) +
		float64(0.97*exact.Pow(w, 0.032)*a) + float64(1.08*exact.Pow(w, 0.0051)) + float64(0.071*lp)))
	depth := func(tau, power float64) float64 {
		return exact.Exp(-tau / exact.Pow(sinH, power))
	}
	tb, b := solisDirect(a, w, lw, lp)
	tg, g := solisGlobal(a, w, lw, lp)
	td, d := solisDiffuse(a, w, lp)
	return Irradiance{
		GlobalWm2:  float64(enhanced * depth(tg, g) * sinH),
		DirectWm2:  float64(enhanced * depth(tb, b)),
		DiffuseWm2: float64(enhanced * depth(td, d)),
	}, true
}

func solisDirect(a, w, lw, lp float64) (tau, power float64) {
	tau = float64((1.82+float64(0.056*lw)+float64(0.0071*lw*lw))*a) +
		(0.33 + float64(0.045*lw) + float64(0.0096*lw*lw)) + float64((float64(0.0089*w)+0.13)*lp)
	power = float64((float64(0.00925*a*a)+float64(0.0148*a)-0.0172)*lw) + (float64(-0.7565*a*a) + float64(0.5057*a) + 0.4557)
	return tau, power
}

func solisGlobal(a, w, lw, lp float64) (tau, power float64) {
	tau = float64((1.24+float64(0.047*lw)+float64(0.0061*lw*lw))*a) +
		(0.27 + float64(0.043*lw) + float64(0.0090*lw*lw)) + float64((float64(0.0079*w)+0.1)*lp)
	power = float64(-0.0147*lw) - float64(0.3079*a*a) + float64(0.2846*a) + 0.3798
	return tau, power
}

func solisDiffuse(a, w, lp float64) (tau, power float64) {
	var t4, t3, t2, t1, t0, tp float64
	if a < 0.05 {
		t4, t3, t2 = float64(86*w)-13800, float64(-3.11*w)+79.4, float64(-0.23*w)+74.8
		t1, t0, tp = float64(0.092*w)-8.86, float64(0.0042*w)+3.12, float64(-0.83*exact.Pow(1+a, -17.2))
	} else {
		t4, t3, t2 = float64(-0.21*w)+11.6, float64(0.27*w)-20.7, float64(-0.134*w)+15.5
		t1, t0, tp = float64(0.0554*w)-5.71, float64(0.0057*w)+2.94, float64(-0.71*exact.Pow(1+a, -15.0))
	}
	tau = float64(a*(t1+float64(a*(t2+float64(a*(t3+float64(a*t4))))))) + t0 + float64(tp*lp)
	power = float64(-0.337*a*a) + float64(0.63*a) + 0.116 + lp/(18+float64(152*a))
	return tau, power
}
