package engine

import (
	"math"

	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// testsOf lists the tests that a series of a quantity has.
func testsOf(q rules.Quantity) rules.TestSet {
	all := rules.Missing.Of() | rules.Sampling.Of() | rules.Clock.Of() | rules.Conflict.Of() | rules.Signal.Of() | rules.Possible.Of()
	switch q {
	case rules.Global, rules.Direct, rules.Diffuse:
		all |= rules.Rare.Of() | rules.Stuck.Of() | rules.Spike.Of() | rules.NightZero.Of() | rules.Closure.Of()
		if q == rules.Diffuse {
			all |= rules.DiffuseRatio.Of() | rules.Rayleigh.Of()
		} else {
			all |= rules.ClearSky.Of()
		}
	case rules.Reflected:
		all |= rules.Rare.Of() | rules.Stuck.Of() | rules.Spike.Of() | rules.NightZero.Of() | rules.Albedo.Of()
	case rules.UV, rules.PAR:
		all |= rules.Stuck.Of() | rules.NightZero.Of()
	case rules.LWDown, rules.LWUp:
		all |= rules.Rare.Of() | rules.Stuck.Of() | rules.Spike.Of() | rules.LWAir.Of() | rules.LWPair.Of()
		if q == rules.LWDown {
			all |= rules.ClearSky.Of()
		}
	}
	return all
}

// Prepare is the stateless stage: it converts rows [from, to) of the block and runs every test that needs no other minute.
// Days may be prepared in any order and at the same time.
func (p *Plan) Prepare(j *Judged, block *minute.Block, from, to int) {
	copy(j.Records[from:to], block.Records[from:to])
	for i := range p.series {
		if p.series[i].weather != nil {
			p.series[i].convert(&j.Series[i], block, p.nothing, nil, from, to)
		}
	}
	air := p.airColumn(j) // for the instruments that have a temperature response and no thermometer of their own
	for i := range p.series {
		if p.series[i].weather == nil {
			p.series[i].convert(&j.Series[i], block, p.nothing, air, from, to)
		}
	}
	p.correctOptics(j, from, to)
	for i := range p.series {
		p.singleTests(j, &p.series[i], &j.Series[i], block, from, to)
	}
	p.houseTests(j, block, from, to)
	p.statusTests(j, block, from, to)
	p.pairTests(j, from, to)
	p.uncertainty(j, from, to)
	p.partnerTests(j, from, to)
}

// singleTests runs what needs one series alone. It begins the rows' sets of tests.
func (p *Plan) singleTests(j *Judged, s *seriesPlan, out *Series, block *minute.Block, from, to int) {
	p.commonTests(s, out, block, from, to)
	if out.bodyC != nil {
		p.bodyTests(j, out, from, to)
		s.brokenBodies(out, block, &p.Station.Limits, from, to)
	}
	p.valueLimits(j, s, out, from, to)
}

// common are the tests that every series has.
const common = rules.TestSet(1<<rules.Missing | 1<<rules.Sampling | 1<<rules.Clock | 1<<rules.Conflict | 1<<rules.Signal)

// commonTests runs the tests that every series has. Most minutes pass them all, so that is written first and put right where not.
func (p *Plan) commonTests(s *seriesPlan, out *Series, block *minute.Block, from, to int) {
	l := &p.Station.Limits
	expected := p.layout.SamplesExpected()
	enough := max(1, uint32(math.Ceil(l.SamplingShare*float64(expected))))
	col := &block.Columns[s.signal]
	low, high := math.NaN(), math.NaN()
	if s.instrument != nil {
		low, high = s.instrument.Input.SignalMin, s.instrument.Input.SignalMax
	}
	for t := rules.Missing; t <= rules.Signal; t++ {
		copy(out.Outcomes[t][from:to], p.passes)
	}
	counts, conflicts, ahead, signals := col.N[:to], col.Conflict[:to], block.Ahead[:to], col.Mean[:to]
	missed, passed := out.Missed[:to], out.Passed[:to]
	for r, v := range out.Measured[:to] {
		if r < from {
			continue
		}
		missed[r], passed[r] = 0, common
		if v == v && counts[r] >= enough && !(signals[r] <= low || signals[r] >= high) && !ahead[r] && !conflicts[r] {
			continue
		}
		passed[r] = 0
		if v != v {
			out.absent(r)
			continue
		}
		out.set(rules.Missing, r, rules.Pass)
		out.set(rules.Sampling, r, limit.Samples(counts[r], expected, l))
		out.set(rules.Clock, r, limit.Clock(ahead[r]))
		out.set(rules.Conflict, r, limit.Conflict(conflicts[r]))
		out.set(rules.Signal, r, limit.Signal(signals[r], low, high))
	}
}

// absent notes that a row has no value.
func (out *Series) absent(r int) {
	for _, t := range [...]rules.Test{rules.Sampling, rules.Clock, rules.Conflict, rules.Signal} {
		out.set(t, r, rules.NoValue)
	}
	out.set(rules.Missing, r, rules.Miss)
	if out.marked[r] {
		out.set(rules.Signal, r, rules.Miss)
	}
}

// bodyTests holds a pyrgeometer's case and dome against the air; what cannot be spoils its signal.
func (p *Plan) bodyTests(j *Judged, out *Series, from, to int) {
	l := &p.Station.Limits
	air := p.airColumn(j)
	for r := from; r < to; r++ {
		if out.Measured[r] == out.Measured[r] && (limit.BodyTemperature(out.bodyC[r], air[r], l) == rules.Miss ||
			limit.BodyTemperature(out.domeC[r], air[r], l) == rules.Miss) {
			out.Passed[r] &^= rules.Signal.Of()
			out.set(rules.Signal, r, rules.Miss)
		}
	}
}

// brokenBodies names the reason where a flux is not known: the case or dome thermometer sent something that cannot mean a temperature, as an
// open or shorted one does.
func (s *seriesPlan) brokenBodies(out *Series, block *minute.Block, l *rules.Limits, from, to int) {
	broken := func(column int, t []float64, r int) bool {
		return column >= 0 && block.Columns[column].N[r] > 0 && !(t[r] >= l.BodyMinC && t[r] <= l.BodyMaxC)
	}
	for r := from; r < to; r++ {
		if out.Measured[r] != out.Measured[r] && (broken(s.bodyCol, out.bodyC, r) || broken(s.domeCol, out.domeC, r)) {
			out.Passed[r] &^= rules.Signal.Of()
			out.set(rules.Signal, r, rules.Miss)
		}
	}
}

// valueLimits holds the values against the limits of their own quantity.
func (p *Plan) valueLimits(j *Judged, s *seriesPlan, out *Series, from, to int) {
	l := &p.Station.Limits
	switch q := s.quantity; q {
	case rules.Global, rules.Direct, rules.Diffuse, rules.Reflected:
		p.sunLimits(j, s, out, &l.Possible[q], &l.Rare[q], -l.Rare[q].Low, from, to)
	case rules.UV:
		p.sunLimits(j, s, out, &l.PossibleUV, nil, -l.PossibleUV.Low, from, to)
	case rules.PAR:
		p.sunLimits(j, s, out, &l.PossiblePAR, nil, -l.PossiblePAR.Low, from, to)
	case rules.LWDown, rules.LWUp:
		bandLimit(out, rules.Possible, l.PossibleLW[q-rules.LWDown], from, to)
		bandLimit(out, rules.Rare, l.RareLW[q-rules.LWDown], from, to)
	case rules.AirTemperature:
		bandLimit(out, rules.Possible, rules.Band{Low: l.AirTemperatureMinC, High: l.AirTemperatureMaxC}, from, to)
	case rules.Humidity:
		bandLimit(out, rules.Possible, rules.Band{Low: 0, High: 105}, from, to) // sensors read up to 5 % high in fog (common practice)
	case rules.Pressure:
		bandLimit(out, rules.Possible, rules.Band{Low: 400, High: 1100}, from, to) // extremes at stations of 0 to 7000 m (common practice)
	case rules.WindSpeed:
		bandLimit(out, rules.Possible, rules.Band{Low: 0, High: 115}, from, to) // strongest gust measured is 113 m/s (from memory)
	}
}

// sunLimits runs what holds a shortwave value against the sun: possible, rare (nil where there is none) and the night's nothing. The zero
// offset that an instrument's class may have widens the lower bounds.
func (p *Plan) sunLimits(j *Judged, s *seriesPlan, out *Series, possible, rare *rules.SunLimit, quietWm2 float64, from, to int) {
	l := &p.Station.Limits
	possibleLow, rareLow := possible.Low, math.NaN()
	if rare != nil {
		possibleLow, rareLow = min(possible.Low, -s.zeroAllowance), min(rare.Low, -s.zeroAllowance)
	}
	suns := j.sun.rows[:to]
	for r, v := range out.Measured[:to] {
		if r < from {
			continue
		}
		sun := &suns[r]
		out.set(rules.Possible, r, limit.WithinSun(v, possibleLow, possible, sun))
		out.set(rules.NightZero, r, limit.NightZero(v, quietWm2, sun, l))
		if rare != nil {
			out.set(rules.Rare, r, limit.WithinSun(v, rareLow, rare, sun))
		}
	}
}

func bandLimit(out *Series, t rules.Test, band rules.Band, from, to int) {
	for r := from; r < to; r++ {
		out.set(t, r, limit.WithinBand(out.Measured[r], band))
	}
}

// pairTests runs what holds one quantity against another in the same minute.
func (p *Plan) pairTests(j *Judged, from, to int) {
	l := &p.Station.Limits
	g, b, d, u := p.primarySeries(j, rules.Global), p.primarySeries(j, rules.Direct), p.primarySeries(j, rules.Diffuse), p.primarySeries(j, rules.Reflected)
	ld, lu := p.primarySeries(j, rules.LWDown), p.primarySeries(j, rules.LWUp)
	air := p.airColumn(j)
	for r := from; r < to; r++ {
		sun := &j.sun.rows[r]
		gv, bv, dv := partner(g, r), partner(b, r), partner(d, r)
		if g != nil || b != nil || d != nil {
			closure := limit.Closure(gv, bv, dv, sun, l)
			setPair(g, rules.Closure, r, closure)
			setPair(b, rules.Closure, r, closure)
			setPair(d, rules.Closure, r, closure)
			setPair(d, rules.DiffuseRatio, r, limit.DiffuseRatio(gv, dv, sun, l))
			if d != nil {
				eclipsed := j.sun.obscured != nil && j.sun.obscured[r] > 0
				setPair(d, rules.Rayleigh, r, limit.Rayleigh(bv, dv, p.pressureHPa, p.series[p.primary[rules.Diffuse]].zeroAllowance, eclipsed, sun, l))
			}
		}
		if u != nil {
			setPair(u, rules.Albedo, r, limit.Albedo(partner(u, r), gv, bv, dv, sun, l))
		}
		if ld != nil || lu != nil {
			ldv, luv := partner(ld, r), partner(lu, r)
			setPair(ld, rules.LWAir, r, limit.LWDownAir(ldv, air[r], l))
			setPair(lu, rules.LWAir, r, limit.LWUpAir(luv, air[r], l))
			pair := limit.LWPair(ldv, luv, l)
			setPair(ld, rules.LWPair, r, pair)
			setPair(lu, rules.LWPair, r, pair)
		}
	}
}

// setPair notes an outcome for one of several parents; where its own value is absent that is the reason.
func setPair(s *Series, t rules.Test, r int, o rules.Outcome) {
	if s == nil {
		return
	}
	if s.Measured[r] != s.Measured[r] {
		o = rules.NoValue
	} else if o == rules.NoValue {
		o = rules.NoPartner
	}
	s.set(t, r, o)
}

// partner is the value to compare with: absent where it has failed on its own, for a bad value says nothing of another.
func partner(s *Series, r int) float64 {
	if s == nil || s.Missed[r]&(rules.Signal.Of()|rules.Possible.Of()) != 0 {
		return math.NaN()
	}
	return s.Measured[r]
}

func (p *Plan) primarySeries(j *Judged, q rules.Quantity) *Series {
	if k := p.primary[q]; k >= 0 {
		return &j.Series[k]
	}
	return nil
}

// airColumn is the air temperature, degrees C, all NaN where the station has none.
func (p *Plan) airColumn(j *Judged) []float64 {
	if s := p.primarySeries(j, rules.AirTemperature); s != nil {
		return s.Measured
	}
	return p.nothing
}
