package engine

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sun"
)

// Resolutions that values are rounded to before they are stored or compared with a limit's edge, as powers of two so that the
// rounded value is exact in binary.
const (
	irradiancePerWm2 = 64   // 1/64 W/m2
	anglePerDegree   = 1024 // 1/1024 degree
)

// RoundIrradiance rounds to the stored resolution of an irradiance, 1/64 W/m2, half to even.
func RoundIrradiance(v float64) float64 {
	return float64(math.RoundToEven(v*irradiancePerWm2)/irradiancePerWm2) + 0 // never minus nothing
}

func roundAngle(v float64) float64 {
	return float64(math.RoundToEven(v*anglePerDegree)/anglePerDegree) + 0
}

// roundBearing is roundAngle for an angle on a circle: what would be rounded up to 360 is north.
func roundBearing(v float64) float64 {
	if r := roundAngle(v); r < 360 {
		return r
	}
	return 0
}

// A sunDay is where the sun stands in each minute of a day, worked out once.
type sunDay struct {
	day      int64
	rows     []limit.Sun
	obscured []float64 // share of the sun's disc that the moon covers; nil on a day without an eclipse here
}

// StandardPressure is the pressure of the standard atmosphere at an elevation, hPa: 1013.25 (1 - 2.25577e-5 h)^5.25588 (ISO
// 2533:1975, from memory), h in metres.
func StandardPressure(elevationM float64) float64 {
	return 1013.25 * exact.Pow(1-float64(2.25577e-5*elevationM), 5.25588)
}

// refractionTemperatureC is the air temperature that refraction is worked out with. The live one would make geometry depend on a
// weather channel for less than 0.02 degrees at the horizon.
const refractionTemperatureC = 10

// sunlightWm2 is what comes from the part of the sun's disc that the moon leaves, normal to the beam: an eclipse scales the expected sky
// and is nobody's fault. The limits keep the whole disc: they are there for what no sky can do.
func (s *sunDay) sunlightWm2(r int) float64 {
	if s.obscured == nil {
		return s.rows[r].SaWm2
	}
	return float64(s.rows[r].SaWm2 * (1 - s.obscured[r]))
}

// fill works out the sun for the day, mid-minute, and writes it to the judged columns.
func (s *sunDay) fill(p *Plan, j *Judged, unixDay int64) {
	s.day = unixDay
	if s.rows == nil {
		s.rows = make([]limit.Sun, minute.PerDay)
	}
	day := sun.NewDay(unixDay, p.site)
	s.obscured = nil
	if eclipse := sun.NewEclipse(&day, p.site); eclipse.Possible() {
		s.obscured = make([]float64, minute.PerDay)
		for i := range s.obscured {
			s.obscured[i] = eclipse.ObscuredFraction(float64(60*i + 30))
		}
	}
	for i := range s.rows {
		at := day.AtMinute(float64(60*i + 30))
		sa := p.Station.Limits.SolarConstantWm2 / (at.DistanceAU * at.DistanceAU)
		apparent, beamMu := p.apparent(&at)
		hidden := p.horizon != nil && (apparent > belowAnyMaskDeg || p.horizon.Hides(apparent, at.AzimuthDeg))
		s.rows[i] = limit.SunOf(roundAngle(at.ZenithDeg), at.CosZenith, roundAngle(apparent), beamMu, sa, hidden)
		j.ZenithDeg[i] = s.rows[i].ZenithDeg
		j.ApparentZenithDeg[i] = s.rows[i].ApparentZenithDeg
		j.AzimuthDeg[i] = roundBearing(at.AzimuthDeg)
		j.CosZenith[i] = s.rows[i].BeamMu
		j.ExtraterrestrialWm2[i] = RoundIrradiance(sa)
	}
}

const (
	// unrefractedZenithDeg is where refraction is not defined any more: see sun.Refraction.
	unrefractedZenithDeg = 91
	// belowAnyMaskDeg is the zenith angle under which no horizon mask can reach: its least elevation is -10 degrees.
	belowAnyMaskDeg = 100
)

// apparent gives the zenith angle with refraction, degrees, and its cosine, nothing below the horizon.
func (p *Plan) apparent(at *sun.FastPosition) (zenithDeg, beamMu float64) {
	if at.ZenithDeg > unrefractedZenithDeg {
		return at.ZenithDeg, 0
	}
	zenithDeg = sun.ApparentZenith(at.ZenithDeg, p.pressureHPa, refractionTemperatureC)
	if at.ZenithDeg > 45 { // nearer the zenith refraction changes the cosine by less than 2e-4 of it
		return zenithDeg, exact.Cos(zenithDeg * (math.Pi / 180))
	}
	return zenithDeg, at.CosZenith
}
