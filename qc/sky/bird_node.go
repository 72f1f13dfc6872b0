package sky

import (
	"math"

	"fluxwarden/qc/exact"
)

// A birdNode is what the Bird model needs of one zenith angle, worked out once: see Bird for the formulas and their source.
type birdNode struct {
	mu0, airMass  float64
	rayleighDepth float64 // -ln TR at the site's pressure
	rayleighSlope float64 // its change for a pressure that is greater by all of itself
	gasDepth      float64 // -ln TUM, which goes with pressure^0.26
	aerosolMass   float64 // m^0.9108
	absorption    float64 // K1 (1 - m + m^1.06)
	diffuseMass   float64 // 0.79/(1 - m + m^1.02)
}

func newBirdNode(zenithDeg, pressureHPa float64) birdNode {
	mu0 := max(exact.Cos(float64(zenithDeg*(math.Pi/180))), 0)
	m := birdAirMass(zenithDeg, mu0)
	logM := exact.Log(m)
	power := func(exponent float64) float64 { return exact.Exp(float64(logM * exponent)) }
	n := birdNode{mu0: mu0, airMass: m, aerosolMass: power(0.9108), absorption: float64(birdAbsorptionK1 * (1 - m + power(1.06))),
		diffuseMass: 0.79 / (1 - m + power(1.02))}
	n.rayleighDepth = birdRayleighDepth(float64(m*pressureHPa) / birdPressureHPa)
	n.rayleighSlope = (birdRayleighDepth(float64(m*pressureHPa*1.01)/birdPressureHPa) - birdRayleighDepth(float64(m*pressureHPa*0.99)/birdPressureHPa)) / 0.02
	n.gasDepth = float64(0.0127 * exact.Exp(float64(0.26*exact.Log(float64(m*pressureHPa)/birdPressureHPa))))
	return n
}

// rayleighMassMax is the air mass up to which the published Rayleigh term holds: its depth falls again beyond 15, near 87 degrees, and the beam
// would grow towards the horizon. From here on it goes on straight, through 1.0 at the horizon, as Kasten 1996 (Solar Energy 56, 239, from
// memory) has it: m/(10.4 + 0.718 m).
const rayleighMassMax = 10

// birdRayleighDepth is -ln TR of the pressure-corrected air mass.
func birdRayleighDepth(mp float64) float64 {
	if mp > rayleighMassMax {
		slope := (publishedRayleighDepth(rayleighMassMax) - publishedRayleighDepth(rayleighMassMax-1))
		return publishedRayleighDepth(rayleighMassMax) + float64(slope*(mp-rayleighMassMax))
	}
	return publishedRayleighDepth(mp)
}

func publishedRayleighDepth(mp float64) float64 {
	l := exact.Log(mp)
	return float64(0.0903 * exact.Exp(float64(0.84*l)) * (1 + mp - exact.Exp(float64(1.01*l))))
}

// A birdAerosol is -ln TA of one unit of m^0.9108.
type birdAerosol float64

func newBirdAerosol(tau float64) birdAerosol {
	if !(tau > 0) {
		return 0
	}
	l := exact.Log(tau)
	return birdAerosol(float64(exact.Exp(float64(0.873*l)) * (1 + tau - exact.Exp(float64(0.7088*l)))))
}

// tau is the inverse of newBirdAerosol, by Newton's method on the logarithm from tau = y^(1/0.873); 0 for nothing.
func (y birdAerosol) tau() float64 {
	if !(y > 0) {
		return 0
	}
	target := exact.Log(float64(y))
	x := target / 0.873 // ln tau
	for range 5 {
		a, b := exact.Exp(x), exact.Exp(float64(0.7088*x))
		bracket := 1 + a - b
		f := float64(0.873*x) + exact.Log(bracket) - target
		x -= f / (0.873 + (a-float64(0.7088*b))/bracket)
		x = min(x, 2)
	}
	return exact.Exp(x)
}

// birdParts of one zenith angle and state, without the aerosol.
func (n *birdNode) parts(st *State, sitePressureHPa float64) birdParts {
	power := func(log, exponent float64) float64 { return exact.Exp(float64(log * exponent)) }
	more := st.PressureHPa/sitePressureHPa - 1
	xo, xw := float64(st.OzoneCm*n.airMass), float64(st.WaterCm*n.airMass)
	return birdParts{
		rayleigh: exact.Exp(-n.rayleighDepth - float64(n.rayleighSlope*more)),
		gas:      exact.Exp(-float64(n.gasDepth * (1 + float64(0.26*more)))),
		ozone: 1 - float64(0.1611*xo*power(exact.Log(1+float64(139.48*xo)), -0.3034)) -
			float64(0.002715*xo)/(1+float64(0.044*xo)+float64(0.0003*xo*xo)),
		water: 1 - float64(2.4959*xw)/(power(exact.Log(1+float64(79.034*xw)), 0.6828)+float64(6.385*xw)),
	}
}

// cleanBeam is the share of the beam that all but the aerosol leaves.
func (t *birdParts) cleanBeam() float64 {
	return float64(0.9662 * t.rayleigh * t.ozone * t.gas * t.water)
}

// share is the irradiance for one unit outside the atmosphere.
func (n *birdNode) share(st *State, sitePressureHPa float64, aerosol birdAerosol) Irradiance {
	t := n.parts(st, sitePressureHPa)
	t.aerosol = exact.Exp(-float64(float64(aerosol) * n.aerosolMass))
	t.absorption = 1 - float64(n.absorption*(1-t.aerosol))
	scattering := 1 - t.aerosol/t.absorption
	direct := float64(t.cleanBeam() * t.aerosol)
	scattered := float64(0.5*(1-t.rayleigh)) + float64(birdForwardCommon*scattering)
	diffuse := float64(n.mu0 * n.diffuseMass * t.ozone * t.gas * t.water * t.absorption * scattered)
	skyAlbedo := 0.0685 + float64((1-birdForwardCommon)*scattering)
	beam := float64(direct * n.mu0)
	global := (beam + diffuse) / (1 - float64(st.Albedo*skyAlbedo))
	return Irradiance{GlobalWm2: global, DirectWm2: direct, DiffuseWm2: global - beam}
}
