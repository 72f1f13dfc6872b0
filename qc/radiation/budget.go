package radiation

import (
	"math"

	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

// A Part is a value with its verdict. The value is NaN where the verdict is rules.Absent.
type Part struct {
	Value   float64
	Verdict rules.Verdict
}

// A Minute is what one minute's budget is derived from. A quantity that the station does not measure is None. Global may be the
// instrument's own or what Best gives; the budget takes it as it is.
type Minute struct {
	Global, Direct, Diffuse, Reflected Part // W/m2; direct normal to the beam
	LWDown, LWUp                       Part // W/m2
	AirTemperature                     Part // degrees C

	ApparentZenithDeg   float64 // of the sun with refraction, mid-minute
	ExtraterrestrialWm2 float64 // normal to the beam
	ClearGlobalWm2      float64 // under a cloudless sky; NaN where not known
	ClearLWDownWm2      float64
}

// A Budget is what is derived of one minute. Signs: positive is a gain of the surface.
type Budget struct {
	NetShortwave Part // global less reflected, W/m2
	NetLongwave  Part // down less up, W/m2
	Net          Part // both, W/m2
	Albedo       Part // reflected over global

	ClearnessIndex  Part // global over extraterrestrial on the horizontal
	DiffuseFraction Part // diffuse over global
	Sunshine        Part // minutes of sunshine: 1 or 0

	// Cloud radiative effect, W/m2: what the cloudy sky gives the surface beyond what a cloudless one would. Global: down only. Longwave:
	// down only. Net: the first less its reflected share, with the second; the surface's own emission is taken as it is.
	CloudGlobal   Part
	CloudLongwave Part
	CloudNet      Part

	SkyEmissivity   Part // effective: lw_down over a black body's flux at air temperature
	SkyTemperatureC Part // of brightness: of a black body that gives lw_down
}

// None is a part that is not there.
func None() Part { return Part{math.NaN(), rules.Absent} }

// Of makes a part of a value and its verdict; a value that is not a number is absent.
func Of(value float64, verdict rules.Verdict) Part {
	if verdict == rules.Absent || value != value {
		return None()
	}
	return Part{value, verdict}
}

const (
	// SunshineWm2 is the direct normal irradiance from which on the sun is said to shine: WMO-No. 8, volume I, chapter 8 (from memory).
	SunshineWm2 = 120
	// ratioZenithMaxDeg is the sun's apparent zenith angle up to which a ratio of shortwave fluxes means something: nearer the horizon the
	// parts' zero offsets and the error of a direct that is worked out are as large as they are (own choice, as closure.report).
	ratioZenithMaxDeg = 85
	// ratioMinWm2 is the least global that one may be divided by: common practice.
	ratioMinWm2 = 20
	// horizonDeg is where the last of the sun's disc is gone: an apparent zenith angle of 90 degrees and the disc's radius.
	horizonDeg = 90.27
)

// Surface derives a minute's budget.
func Surface(m *Minute) Budget {
	cosZenith := cosDeg(m.ApparentZenithDeg)
	high := m.ApparentZenithDeg <= ratioZenithMaxDeg
	b := Budget{
		NetShortwave:    m.Global.less(m.Reflected),
		NetLongwave:     m.LWDown.less(m.LWUp),
		Albedo:          ratio(m.Reflected, m.Global, high),
		DiffuseFraction: ratio(m.Diffuse, m.Global, high),
		ClearnessIndex:  ratio(m.Global, Of(m.ExtraterrestrialWm2*cosZenith, rules.Accepted), high),
		Sunshine:        sunshine(m, cosZenith),
	}
	b.Net = b.NetShortwave.plus(b.NetLongwave)
	b.CloudGlobal = m.Global.less(Of(m.ClearGlobalWm2, rules.Accepted))
	if m.ApparentZenithDeg > horizonDeg { // a cloud takes nothing from the night, nor is a zero offset its doing
		b.CloudGlobal = Part{0, rules.Accepted}
	}
	b.CloudLongwave = m.LWDown.less(Of(m.ClearLWDownWm2, rules.Accepted))
	b.CloudNet = cloudNet(&b)
	b.SkyEmissivity, b.SkyTemperatureC = skyOf(m)
	return b
}

// cloudNet takes the reflected share off the shortwave effect. Where the sun is too low for an albedo there is no net effect, but by night
// there is no shortwave to reflect.
func cloudNet(b *Budget) Part {
	shortwave := b.CloudGlobal
	if shortwave.Value != 0 {
		shortwave = combine(b.CloudGlobal, b.Albedo, func(effect, albedo float64) float64 { return float64(effect * (1 - albedo)) })
	}
	return shortwave.plus(b.CloudLongwave)
}

// sunshine is 1 where the beam is at least SunshineWm2. Without a direct that may be used it is worked out of global and diffuse where
// the sun is high enough; below the horizon the sun does not shine.
func sunshine(m *Minute, cosZenith float64) Part {
	if m.ApparentZenithDeg > horizonDeg {
		return Part{0, rules.Accepted}
	}
	beam := m.Direct
	if beam.Verdict != rules.Accepted && m.ApparentZenithDeg <= ratioZenithMaxDeg {
		if other := m.Global.less(m.Diffuse); better(other.Verdict, beam.Verdict) {
			beam = Part{other.Value / cosZenith, other.Verdict}
		}
	}
	if beam.Verdict == rules.Absent {
		return None()
	}
	shines := 0.0
	if beam.Value >= SunshineWm2 {
		shines = 1
	}
	return Part{shines, beam.Verdict}
}

// skyOf gives the sky's effective emissivity and its brightness temperature, degrees C.
func skyOf(m *Minute) (emissivity, temperatureC Part) {
	emissivity, temperatureC = None(), None()
	if m.LWDown.Verdict == rules.Absent || !(m.LWDown.Value > 0) {
		return emissivity, temperatureC
	}
	temperatureC = Part{SkyTemperatureC(m.LWDown.Value), m.LWDown.Verdict}
	emissivity = combine(m.LWDown, m.AirTemperature, SkyEmissivity)
	return emissivity, temperatureC
}

// SkyEmissivity is the sky's effective emissivity: its longwave, W/m2, over a black body's at air temperature, degrees C. NaN for a
// temperature below -150 degrees C and what is not a number.
func SkyEmissivity(lwDownWm2, airC float64) float64 {
	if !(airC > -150) {
		return math.NaN()
	}
	return lwDownWm2 / sensor.BlackbodyFlux(airC+sensor.ZeroCelsiusK)
}

// SkyTemperatureC is the temperature, degrees C, of the black body that gives the flux, W/m2, by the law of Stefan and Boltzmann; NaN
// for one that is not above nothing.
func SkyTemperatureC(lwDownWm2 float64) float64 {
	if !(lwDownWm2 > 0) {
		return math.NaN()
	}
	return sensor.BlackbodyTemperature(lwDownWm2) - sensor.ZeroCelsiusK
}
