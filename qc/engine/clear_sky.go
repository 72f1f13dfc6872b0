package engine

import (
	"math"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sky"
	"fluxwarden/rules"
)

// skySetup is a station's cloudless sky as its site file has it.
func skySetup(st *rules.Station, pressureHPa float64) fault.SkySetup {
	model, ok := sky.ParseModel(st.Sky.Model)
	if !ok {
		model = sky.BirdHulstrom // a station that did not pass through rules.Parse
	}
	out := fault.SkySetup{Site: sky.NewSite(model, st.ElevationM, pressureHPa)}
	of := func(months []float64, i int, constant float64) float64 {
		if i < len(months) {
			return months[i]
		}
		return constant
	}
	s := &st.Sky
	for i := range out.Inputs {
		out.Inputs[i] = fault.SkyInputs{Aerosol: of(s.Monthly.AOD, i, s.AOD), WaterCm: of(s.Monthly.WaterCm, i, s.WaterCm),
			OzoneCm: of(s.Monthly.OzoneCm, i, s.OzoneCm), Albedo: of(s.Monthly.Albedo, i, s.Albedo)}
	}
	return out
}

// liveSky reads what the site file's channels send of the sky.
func (p *Plan) liveSky(block *minute.Block, r int) fault.SkyInputs {
	read := func(column int) float64 {
		if column < 0 || block == nil || block.Columns[column].N[r] == 0 {
			return math.NaN()
		}
		return block.Columns[column].Mean[r]
	}
	return fault.SkyInputs{Aerosol: read(p.skyColumns[0]), WaterCm: read(p.skyColumns[1]), OzoneCm: read(p.skyColumns[2]), Albedo: read(p.skyColumns[3])}
}

// LearntSky is what the summaries of the days before teach of a day's cloudless sky.
func (p *Plan) LearntSky(day int64, history []DaySummary) sky.Learnt {
	var facts []fault.DayFacts
	for i := range history {
		if h := &history[i]; h.Day < day && h.Day >= day-HistoryDays {
			facts = append(facts, h.Facts)
		}
	}
	return fault.LearntSky(p.setup, day, facts)
}

// FittedSky is the cloudless sky that fits a day's own clear minutes; ok is false where it had too few.
func (p *Plan) FittedSky(s *DaySummary) (fit sky.Learnt, ok bool) {
	return fault.FitSky(p.setup, &s.Facts)
}

// Cloudless works out what a cloudless sky would give in the rows of a judged day, from another sky than the day was judged with. Channels
// that send of the sky itself do not count.
func (p *Plan) Cloudless(j *Judged, learnt sky.Learnt) []sky.Irradiance {
	out := make([]sky.Irradiance, j.Rows)
	c := fault.NewCloudless(p.setup, j.Day, learnt)
	nan := math.NaN()
	m := fault.Minute{Sky: fault.SkyInputs{Aerosol: nan, WaterCm: nan, OzoneCm: nan, Albedo: nan}}
	for r := range out {
		m.Minute = j.Day*minute.PerDay + int64(r)
		m.ZenithDeg, m.Mu, m.SaWm2 = j.ApparentZenithDeg[r], j.CosZenith[r], RoundIrradiance(j.sun.sunlightWm2(r))
		for q := range m.Value {
			m.Value[q] = nan
			if s := p.primarySeries(j, rules.Quantity(q)); s != nil {
				m.Value[q] = s.Measured[r]
			}
		}
		out[r] = c.At(&m, true)
	}
	return out
}

// clearSky holds global, direct and lw_down against the learnt sky of the minute.
func (j *Judger) clearSky(r int) {
	d, l := j.judged, &j.plan.Station.Limits
	row := &d.sun.rows[r]
	eclipsed := d.sun.obscured != nil && d.sun.obscured[r] > 0
	sky, longwave := j.watcher.SkyLearnt()
	if s := j.plan.primarySeries(d, rules.Global); s != nil {
		s.set(rules.ClearSky, r, limit.ClearGlobal(s.Measured[r], d.ClearGlobalWm2[r], &j.above, sky, eclipsed, row, l))
	}
	if s := j.plan.primarySeries(d, rules.Direct); s != nil {
		cleanest := d.ClearDirectWm2[r]
		if s.Measured[r] > cleanest { // seldom enough to ask the model once more
			cleanest = RoundIrradiance(j.watcher.CleanestDirect(&j.minute))
		}
		s.set(rules.ClearSky, r, limit.ClearDirect(s.Measured[r], cleanest, sky, eclipsed, row, l))
	}
	if s := j.plan.primarySeries(d, rules.LWDown); s != nil {
		s.set(rules.ClearSky, r, limit.ClearLongwave(s.Measured[r], d.ClearLWDownWm2[r], j.minute.Value[rules.AirTemperature], longwave, l))
	}
}
