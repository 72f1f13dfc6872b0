package sky

import (
	"math"

	"fluxwarden/qc/exact"
)

// BirdInput is the state of sky and ground for Bird.
type BirdInput struct {
	ZenithDeg           float64 // 0..180
	ExtraterrestrialWm2 float64 // normal, of the day: S0/R^2
	PressureHPa         float64 // 300..1100
	OzoneCm             float64 // 0..1; 0.3 is common
	WaterCm             float64 // 0..10
	AOD380, AOD500      float64 // aerosol optical depth, 0..2
	ForwardScatter      float64 // Ba, 0.5..1; 0 means 0.85
	Albedo              float64 // of the ground, 0..1
}

const (
	birdPressureHPa   = 1013 // the agency's worksheet; 1013.25 changes direct by 0.025 W m-2
	birdZenithMaxDeg  = 88
	birdForwardCommon = 0.85
	birdAbsorptionK1  = 0.1
)

// Bird returns the cloudless irradiance.
//
// Source: Bird and Hulstrom 1981, SERI/TR-642-761, with the ozone exponent -0.3034 and the aerosol
// weight 0.2758 of the agency's worksheet, whose printed rows it repeats; air mass of Kasten 1966 with
// the exponent -1.25.
// Validity: zenith to 88 degrees. From 90 degrees on everything is 0 and ok; between, and for inputs
// outside their ranges, ok is false.
// Worked value: 806.678072 direct, 452.980 global (worksheet, day 1, 13 h), see the test.
func Bird(in BirdInput) (Irradiance, bool) {
	if in.ForwardScatter == 0 {
		in.ForwardScatter = birdForwardCommon
	}
	switch {
	case !in.valid():
		return Irradiance{}, false
	case in.ZenithDeg >= 90:
		return Irradiance{}, true
	case in.ZenithDeg > birdZenithMaxDeg:
		return Irradiance{}, false
	}
	mu0 := exact.Cos(float64(in.ZenithDeg * (math.Pi / 180)))
	airMass := birdAirMass(in.ZenithDeg, mu0)
	t := birdTransmittances(in, airMass, float64(airMass*in.PressureHPa)/birdPressureHPa)
	return t.irradiance(in, mu0, airMass), true
}

func (in BirdInput) valid() bool {
	return within(in.ZenithDeg, 0, 180) && within(in.ExtraterrestrialWm2, 0, 2000) && within(in.PressureHPa, 300, 1100) &&
		within(in.OzoneCm, 0, 1) && within(in.WaterCm, 0, 10) && within(in.AOD380, 0, 2) && within(in.AOD500, 0, 2) &&
		within(in.ForwardScatter, 0.5, 1) && within(in.Albedo, 0, 1)
}

// birdParts holds the transmittances: Rayleigh, ozone, mixed gases, water vapour, aerosol, aerosol
// absorption; and the albedo of the sky.
type birdParts struct{ rayleigh, ozone, gas, water, aerosol, absorption, skyAlbedo float64 }

// birdAirMass is Kasten 1966 with the exponent -1.25 that the report and the worksheet use.
func birdAirMass(zenithDeg, mu0 float64) float64 {
	return 1 / (mu0 + float64(0.15*exact.Pow(93.885-zenithDeg, -1.25)))
}

// birdTransmittances takes the air mass m and the pressure-corrected one mp. Powers of one base share its
// logarithm.
func birdTransmittances(in BirdInput, m, mp float64) birdParts {
	power := func(log, exponent float64) float64 { return exact.Exp(float64(log * exponent)) }
	logM, logMp := exact.Log(m), exact.Log(mp)
	xo := float64(in.OzoneCm * m)
	xw := float64(in.WaterCm * m)
	tau := float64(0.2758*in.AOD380) + float64(0.35*in.AOD500)
	var t birdParts
	t.rayleigh = exact.Exp(float64(-0.0903 * power(logMp, 0.84) * (1 + mp - power(logMp, 1.01))))
	t.ozone = 1 - float64(0.1611*xo*power(exact.Log(1+float64(139.48*xo)), -0.3034)) -
		float64(0.002715*xo)/(1+float64(0.044*xo)+float64(0.0003*xo*xo))
	t.gas = exact.Exp(float64(-0.0127 * power(logMp, 0.26)))
	t.water = 1 - float64(2.4959*xw)/(power(exact.Log(1+float64(79.034*xw)), 0.6828)+float64(6.385*xw))
	t.aerosol = 1
	if tau > 0 {
		logTau := exact.Log(tau)
		t.aerosol = exact.Exp(float64(-power(logTau, 0.873) * (1 + tau - power(logTau, 0.7088)) * power(logM, 0.9108)))
	}
	t.absorption = 1 - float64(birdAbsorptionK1*(1-m+power(logM, 1.06))*(1-t.aerosol))
	t.skyAlbedo = 0.0685 + float64((1-in.ForwardScatter)*(1-t.aerosol/t.absorption))
	return t
}

func (t birdParts) irradiance(in BirdInput, mu0, m float64) Irradiance {
	direct := float64(0.9662 * in.ExtraterrestrialWm2 * t.rayleigh * t.ozone * t.gas * t.water * t.aerosol)
	scattered := float64(0.5*(1-t.rayleigh)) + float64(in.ForwardScatter*(1-t.aerosol/t.absorption))
	diffuse := float64(in.ExtraterrestrialWm2*mu0*0.79*t.ozone*t.gas*t.water*t.absorption*scattered) /
		(1 - m + exact.Exp(float64(1.02*exact.Log(m))))
	beam := float64(direct * mu0)
	global := (beam + diffuse) / (1 - float64(in.Albedo*t.skyAlbedo))
	return Irradiance{GlobalWm2: global, DirectWm2: direct, DiffuseWm2: global - beam}
}
