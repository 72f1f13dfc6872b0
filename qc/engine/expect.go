package engine

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sky"
	"fluxwarden/qc/sun"
)

// An Expectation is what the judge expects of one instant before it has learnt anything of the site.
type Expectation struct {
	ZenithDeg                     float64 // airless
	ApparentZenithDeg             float64 // with refraction
	AzimuthDeg                    float64 // from north, clockwise
	DistanceAU                    float64
	ExtraterrestrialWm2           float64 // normal to the beam
	ExtraterrestrialHorizontalWm2 float64 // nothing at night
	Clear                         sky.Irradiance
	ClearLWDownWm2                float64 // NaN: it needs air temperature and humidity
	Sun                           limit.Sun
}

// Expect evaluates the full solar position algorithm at an instant, in microseconds since 1970, UTC, and the clear sky of the
// station's model with what the site file and the defaults say of air and ground.
func (p *Plan) Expect(unixMicros int64) Expectation {
	day := minute.Stamp(unixMicros).Day()
	at := sun.At(unixMicros, p.site, p.pressureHPa, refractionTemperatureC, sun.DeltaTSeconds(sun.DecimalYear(day)))
	e := Expectation{ZenithDeg: at.ZenithDeg, ApparentZenithDeg: at.ApparentZenithDeg, AzimuthDeg: at.AzimuthDeg, DistanceAU: at.DistanceAU,
		ExtraterrestrialWm2: sun.ExtraterrestrialNormal(p.Station.Limits.SolarConstantWm2, at.DistanceAU), ClearLWDownWm2: math.NaN()}
	cosine := exact.Cos(at.ZenithDeg * (math.Pi / 180))
	apparent := exact.Cos(at.ApparentZenithDeg * (math.Pi / 180))
	e.ExtraterrestrialHorizontalWm2 = e.ExtraterrestrialWm2 * max(cosine, 0)
	hidden := p.horizon != nil && p.horizon.Hides(at.ApparentZenithDeg, at.AzimuthDeg)
	e.Sun = limit.SunOf(at.ZenithDeg, cosine, at.ApparentZenithDeg, apparent, e.ExtraterrestrialWm2, hidden)
	state := p.setup.Sky.State(day, p.pressureHPa)
	clear := p.setup.Sky.At(at.ApparentZenithDeg, e.ExtraterrestrialWm2, &state)
	e.Clear = clear
	return e
}
