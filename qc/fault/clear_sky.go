package fault

import (
	"math"

	"fluxwarden/qc/sky"
	"fluxwarden/rules"
)

// A SkySetup is the cloudless sky of a station before anything is learnt: its model and what the site file says of air and ground.
type SkySetup struct {
	*sky.Site
	Inputs [12]SkyInputs // by month, January first
}

// SkyInputs are the site file's, NaN where it says nothing.
type SkyInputs struct{ Aerosol, WaterCm, OzoneCm, Albedo float64 }

// State is the state of air and ground that the site file and the defaults come to on a day, counted from 1970, at a pressure in hPa.
func (s *SkySetup) State(day int64, pressureHPa float64) sky.State {
	st := sky.DefaultState(pressureHPa)
	in := &s.Inputs[monthOf(day)]
	for _, c := range [...]struct {
		from float64
		to   *float64
	}{{in.Aerosol, &st.Aerosol}, {in.WaterCm, &st.WaterCm}, {in.OzoneCm, &st.OzoneCm}, {in.Albedo, &st.Albedo}} {
		if c.from == c.from {
			*c.to = c.from
		}
	}
	return st
}

// monthOf is the month of a day counted from 1970, 0 for January: the civil calendar counted from 1 March of the year 0.
func monthOf(day int64) int {
	z := day + 719468
	era := z / 146097
	if z < 0 {
		era = (z - 146096) / 146097
	}
	doe := z - era*146097
	yoe := (doe - doe/1460 + doe/36524 - doe/146096) / 365
	doy := doe - (365*yoe + yoe/4 - yoe/100)
	return int((5*doy+2)/153+2) % 12
}

// learnSky is what the facts of the days before have taught of the cloudless sky of a day, closure being how the station's global stands to
// direct and diffuse. Facts of another model teach nothing of this one.
func learnSky(s *Setup, day int64, facts []DayFacts, closure float64) sky.Learnt {
	var fits [31]sky.DayFit
	n := 0
	for i := range facts {
		f := &facts[i]
		if f.SkyModel != s.Sky.Model().String() || f.Aerosol.N < trustedMinutes/skySampleEvery || n == len(fits) {
			continue
		}
		fits[n] = sky.DayFit{Day: f.Day, Minutes: f.Aerosol.N * skySampleEvery, LogAerosol: f.Aerosol.Median.Float(), DiffuseGain: f.DiffuseGain.Median.Float()}
		n++
	}
	return sky.Learn(day, fits[:n], s.Sky.State(day, s.PressureHPa).Aerosol, closure)
}

// LearntSky is learnSky with the closure of the same facts.
func LearntSky(s *Setup, day int64, facts []DayFacts) sky.Learnt {
	b := learn(s, day, facts)
	return b.sky
}

// FitSky is the cloudless sky that fits a day's own clear minutes; ok is false where it had too few.
func FitSky(s *Setup, f *DayFacts) (fit sky.Learnt, ok bool) {
	if f.SkyModel != s.Sky.Model().String() || f.Aerosol.N < trustedMinutes/skySampleEvery {
		return fit, false
	}
	closure := math.NaN()
	if f.Closure.N >= trustedMinutes {
		closure = f.Closure.Median.Float()
	}
	return sky.Fit(f.Day, f.Aerosol.Median.Float(), f.DiffuseGain.Median.Float(), closure), true
}

// A Cloudless follows what a cloudless sky would give through one day.
type Cloudless struct {
	setup  *Setup
	learnt sky.Learnt
	table  *sky.Table
	given  SkyInputs // of the site file, this month
}

// NewCloudless begins a day with what is learnt for it.
func NewCloudless(setup *Setup, day int64, learnt sky.Learnt) Cloudless {
	state := setup.Sky.State(day, setup.PressureHPa)
	state.Aerosol = learnt.Aerosol
	return Cloudless{setup: setup, learnt: learnt, table: sky.NewTable(setup.Sky.Site, state), given: setup.Sky.Inputs[monthOf(day)]}
}

// At is the cloudless irradiance of a minute, whose live inputs it takes. The ground's albedo is taken from the minute where ground is true.
// Minutes come in order, the day's first one first.
func (c *Cloudless) At(m *Minute, ground bool) sky.Irradiance {
	if !(m.ZenithDeg < twilightEndDeg) {
		return sky.Irradiance{}
	}
	if m.Minute%SkyInputsEvery == 0 {
		c.read(m, ground)
	}
	return c.learnt.Apply(c.table.At(m.ZenithDeg, m.Mu, m.SaWm2), m.Mu)
}

// clearSky fills in what a cloudless sky would give.
func (w *Watcher) clearSky(m *Minute) {
	m.Clear = noClear
	ground := m.Minute%SkyInputsEvery == 0 && !w.tainted(rules.Reflected) && !w.tainted(rules.Global)
	clear := w.cloudless.At(m, ground)
	m.Clear[rules.Global], m.Clear[rules.Direct], m.Clear[rules.Diffuse] = clear.GlobalWm2, clear.DirectWm2, clear.DiffuseWm2
	m.Clear[rules.LWDown] = w.base.kLW * clearLongwave(m.Value[rules.AirTemperature], m.Value[rules.Humidity])
}

// SkyLearnt says whether the days before have taught of the cloudless sky, of shortwave and of longwave.
func (w *Watcher) SkyLearnt() (shortwave, longwave bool) { return w.base.skyKnown, w.base.lwKnown }

// cleanestDeviations is how many standard deviations below the expected load the cleanest sky lies.
const cleanestDeviations = 3

// CleanestDirect is the beam that the least load of the learnt sky's band would leave in a minute that has been watched, W/m2.
func (w *Watcher) CleanestDirect(m *Minute) float64 {
	if w.cleanest == nil {
		w.cleanest = sky.NewTable(w.setup.Sky.Site, w.cloudless.table.State())
	}
	st := w.cloudless.table.State()
	st.Aerosol, _ = w.base.sky.AerosolBand(cleanestDeviations)
	w.cleanest.Set(st)
	return w.cleanest.At(m.ZenithDeg, m.Mu, m.SaWm2).DirectWm2
}

var noClear = func() (c [rules.RadiationCount]float64) {
	for q := range c {
		c[q] = math.NaN()
	}
	return c
}()

const (
	// twilightEndDeg is the end of civil twilight.
	twilightEndDeg = 96
	// SkyInputsEvery is how often, minutes of the day, live inputs are looked at: air and ground change slowly.
	SkyInputsEvery = 10
)

// read takes what is live: water from air temperature and humidity unless the site file gives it, the pressure, the ground's albedo from
// reflected, and the channels that the site file names. What moved little is left, so that the models need not be worked out again.
func (c *Cloudless) read(m *Minute, ground bool) {
	st := c.table.State()
	if c.given.WaterCm != c.given.WaterCm {
		if water := sky.PrecipitableWater(m.Value[rules.AirTemperature], m.Value[rules.Humidity]); moved(water, st.WaterCm, 0.03) {
			st.WaterCm = water
		}
	}
	if p, usual := m.Value[rules.Pressure], c.setup.PressureHPa; math.Abs(p-usual) < float64(0.08*usual) && moved(p, st.PressureHPa, 0.002) {
		st.PressureHPa = p
	}
	up, down := m.Value[rules.Reflected], m.Value[rules.Global]
	if ground && c.given.Albedo != c.given.Albedo && m.Mu > 0.2 && down > 100 {
		if albedo := min(max(up/down, 0.02), 0.95); math.Abs(albedo-st.Albedo) > 0.03 {
			st.Albedo = albedo
		}
	}
	for _, x := range [...]struct {
		live, low, high float64
		to              *float64
	}{{m.Sky.Aerosol, 0, sky.AerosolMax, &st.Aerosol}, {m.Sky.WaterCm, 0.05, 10, &st.WaterCm}, {m.Sky.OzoneCm, 0.05, 0.7, &st.OzoneCm}, {m.Sky.Albedo, 0, 1, &st.Albedo}} {
		if x.live >= x.low && x.live <= x.high {
			*x.to = x.live
		}
	}
	c.table.Set(st)
}

// moved says whether a number moved by more than a share of it; false for what is not a number.
func moved(now, then, share float64) bool { return math.Abs(now-then) > float64(share*then) }

// clearLongwave is the flux from a cloudless sky, W/m2, from air temperature (degrees C) and humidity (%), after Prata 1996;
// NaN without them.
func clearLongwave(airC, humidityPercent float64) float64 {
	return sky.LongwaveClear(airC, humidityPercent)
}
