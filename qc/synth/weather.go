package synth

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sensor"
	"fluxwarden/qc/sky"
	"fluxwarden/qc/sun"
)

const (
	secondsPerDay = 86400
	radPerDeg     = math.Pi / 180

	lapseKPerM = 0.0065 // of the standard atmosphere (ISO 2533)

	// birdZenithMaxDeg is where the model of the cloudless sky ends; below, the sky is carried on into the dusk.
	birdZenithMaxDeg = 87.5
)

// slow is the state of what changes within minutes, at the start of a minute. It is joined linearly to the next.
type slow struct {
	east, north, up float64 // the unit vector to the sun, refraction in
	mu              float64 // cosine of the apparent zenith angle, 0 at night
	zenithDeg       float64 // apparent
	extraWm2        float64 // extraterrestrial normal, an eclipse taken off
	open            float64 // 1 where the horizon lets the beam through
	clearDirect     float64 // normal, W/m2
	clearDiffuse    float64
	cover           float64 // of clouds, 0..1
	depth           float64 // optical, of a cloud that is closed
	airC, dewC      float64
	humidityPct     float64
	pressureHPa     float64
	windMs          float64
	albedo          float64
	clearLW         float64
	groundHeat      float64 // K above the air for each W/m2 that the ground takes in
}

// minuteState gives the slow state at the start of a minute, since 1970.
func (s *Station) minuteState(at int64) *slow {
	for i := range s.kept {
		if s.keptMinute[i] == at {
			return &s.kept[i]
		}
	}
	i := int(at & 1)
	s.kept[i], s.keptMinute[i] = s.makeState(at), at
	return &s.kept[i]
}

func (s *Station) makeState(at int64) slow {
	day := minute.FloorDiv(at, minute.PerDay)
	secondOfDay := float64(60 * (at - day*minute.PerDay))
	if s.day.UnixDay() != day || !s.dayMade {
		s.day, s.dayMade = sun.NewDay(day, s.site), true
		s.eclipse = sun.NewEclipse(&s.day, s.site)
	}
	var w slow
	t := 60 * float64(at)
	s.clouds(&w, t)
	s.air(&w, t, secondOfDay)
	s.sun(&w, secondOfDay)
	s.cloudless(&w, t)
	return w
}

// sun sets where the sun is and what of it arrives above the air.
func (s *Station) sun(w *slow, secondOfDay float64) {
	p := s.day.AtMinute(secondOfDay)
	w.zenithDeg = sun.ApparentZenith(p.ZenithDeg, w.pressureHPa, w.airC)
	sinZ, cosZ := exact.Sincos(w.zenithDeg * radPerDeg)
	sinA, cosA := exact.Sincos(p.AzimuthDeg * radPerDeg)
	w.east, w.north, w.up = sinZ*sinA, sinZ*cosA, cosZ
	w.mu = math.Max(0, cosZ)
	w.extraWm2 = float64(sun.ExtraterrestrialNormal(0, p.DistanceAU) * (1 - s.eclipse.ObscuredFraction(secondOfDay)))
	if 90-w.zenithDeg > s.horizon.ElevationAt(p.AzimuthDeg) {
		w.open = 1
	}
}

// air sets temperature, humidity, pressure and wind.
func (s *Station) air(w *slow, t, secondOfDay float64) {
	c := &s.climate
	dayOfYear := math.Mod(t/secondsPerDay, 365.2425)
	warmest := 201.0 // late July; from 1970-01-01 on, the year's length keeps it within a day
	if s.site.LatitudeDeg < 0 {
		warmest -= 182.6
	}
	season := c.MeanC + float64(c.SeasonC*exact.Cos(2*math.Pi*(dayOfYear-warmest)/365.2425))
	solarHour := secondOfDay/3600 + s.site.LongitudeDeg/15
	daily := float64(c.DayC * exact.Cos(2*math.Pi*(solarHour-14.6)/24) * (1 - float64(0.65*w.cover)))
	weather := float64(c.WeatherC * s.chance.air.smooth(t, 55*3600))
	w.airC = clamp(season+weather+daily+float64(0.25*s.chance.air.smooth(t, 900)), -44, 50)
	spread := float64(c.DewDepressionK * (1 - float64(0.6*w.cover)) * (1 + float64(0.3*s.chance.dew.smooth(t, 20*3600))))
	w.dewC = clamp(season+weather-spread, -44, w.airC-0.1)
	w.humidityPct = clamp(100*sky.SaturationWater(w.dewC)/sky.SaturationWater(w.airC), 3, 100)
	w.pressureHPa = s.meanPressureHPa + float64(7*s.chance.pressure.smooth(t, 60*3600))
	gust := 1 + float64(0.5*s.chance.wind.smooth(t, 9*3600)) + float64(0.25*s.chance.wind.smooth(t, 240))
	w.windMs = math.Max(0.1, float64(c.WindMs*gust)*(1-float64(0.25*exact.Cos(2*math.Pi*(solarHour-3)/24))))
	w.albedo, w.groundHeat = c.Albedo, c.GroundHeatsK/800
	if season < -0.5 {
		w.albedo, w.groundHeat = c.SnowAlbedo, 1.0/800
	}
}

// cloudless sets what the sky would give without clouds: Bird and Hulstrom, carried on into the dusk, and Brutsaert.
func (s *Station) cloudless(w *slow, t float64) {
	waterCm := clamp(sky.PrecipitableWater(w.airC, math.Min(w.humidityPct, 100)), 0.1, 7)
	aod := clamp(s.climate.AOD*exact.Exp(0.35*s.chance.aerosol.smooth(t, 30*3600)), 0.02, 0.6)
	in := sky.BirdInput{ZenithDeg: math.Min(w.zenithDeg, birdZenithMaxDeg), ExtraterrestrialWm2: w.extraWm2, PressureHPa: clamp(w.pressureHPa, 300, 1100),
		OzoneCm: s.climate.OzoneCm, WaterCm: waterCm, AOD380: 1.3 * aod, AOD500: aod, Albedo: w.albedo}
	clear, _ := sky.Bird(in)
	w.clearDirect, w.clearDiffuse = clear.DirectWm2, clear.DiffuseWm2
	if below := w.zenithDeg - birdZenithMaxDeg; below > 0 {
		w.clearDirect = clear.DirectWm2 * (1 - ramp(w.zenithDeg, birdZenithMaxDeg, 90.3))
		w.clearDiffuse = clear.DiffuseWm2 * exact.Exp(-below/1.5)
		if w.zenithDeg > 100 {
			w.clearDiffuse = 0
		}
	}
	w.clearDirect *= w.open
	w.clearLW = sky.LongwaveBrutsaert(w.airC+sensor.ZeroCelsiusK, sky.SaturationWater(w.dewC))
}

// clouds sets how much of the sky is covered: a slow process, cut at the climate's shares into clear, broken and overcast.
func (s *Station) clouds(w *slow, t float64) {
	c := &s.climate
	n := float64(0.85*s.chance.regime.smooth(t, 26*3600)) + float64(0.53*s.chance.regimeFast.smooth(t, 4*3600))
	place := share(n)
	switch broken := place - c.ClearShare; {
	case broken <= 0:
		w.cover = 0
	case broken < c.BrokenShare:
		w.cover = broken / c.BrokenShare
	default:
		w.cover = 1
	}
	w.depth = clamp(c.OvercastDepth*exact.Exp(0.45*s.chance.depth.smooth(t, 5400)), 3, 90)
}
