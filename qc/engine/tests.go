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
			all |= rules.DiffuseRatio.Of()
		}
	case rules.Reflected:
		all |= rules.Rare.Of() | rules.Stuck.Of() | rules.Spike.Of() | rules.NightZero.Of() | rules.Albedo.Of()
	case rules.UV, rules.PAR:
		all |= rules.Stuck.Of() | rules.NightZero.Of()
	case rules.LWDown, rules.LWUp:
		all |= rules.Rare.Of() | rules.Stuck.Of() | rules.Spike.Of() | rules.LWAir.Of() | rules.LWPair.Of()
	}
	return all
}

// Prepare is the stateless stage: it converts rows [from, to) of the block and runs every test that needs no other minute.
// Days may be prepared in any order and at the same time.
func (p *Plan) Prepare(j *Judged, block *minute.Block, from, to int) {
	copy(j.Records[from:to], block.Records[from:to])
	for i := range p.series {
		p.series[i].convert(&j.Series[i], block, from, to)
	}
	for i := range p.series {
		p.singleTests(j, &p.series[i], &j.Series[i], block, from, to)
	}
	p.pairTests(j, from, to)
}

// singleTests runs what needs one series alone.
func (p *Plan) singleTests(j *Judged, s *seriesPlan, out *Series, block *minute.Block, from, to int) {
	l := &p.Station.Limits
	expected := p.layout.SamplesExpected()
	col := &block.Columns[s.signal]
	air := p.airColumn(j)
	low, high := math.NaN(), math.NaN()
	if s.instrument != nil {
		low, high = s.instrument.Input.SignalMin, s.instrument.Input.SignalMax
	}
	for r := from; r < to; r++ {
		v := out.Value[r]
		sun := &j.sun.rows[r]
		if math.IsNaN(v) {
			out.set(rules.Missing, r, rules.Miss)
			if out.marked[r] {
				out.set(rules.Signal, r, rules.Miss)
			} else {
				out.set(rules.Signal, r, rules.NoValue)
			}
			for _, t := range [...]rules.Test{rules.Sampling, rules.Clock, rules.Conflict, rules.Possible, rules.Rare, rules.NightZero} {
				out.set(t, r, rules.NoValue)
			}
			continue
		}
		out.set(rules.Missing, r, rules.Pass)
		out.set(rules.Sampling, r, limit.Samples(col.N[r], expected, l))
		out.set(rules.Clock, r, limit.Clock(block.Ahead[r]))
		out.set(rules.Conflict, r, limit.Conflict(col.Conflict[r]))
		signal := limit.Signal(col.Mean[r], low, high)
		if out.bodyC != nil && (limit.BodyTemperature(out.bodyC[r], air[r], l) == rules.Miss ||
			limit.BodyTemperature(out.domeC[r], air[r], l) == rules.Miss) {
			signal = rules.Miss
		}
		out.set(rules.Signal, r, signal)
		p.valueLimits(s, out, r, v, sun)
	}
}

// valueLimits holds one value against the limits of its own quantity.
func (p *Plan) valueLimits(s *seriesPlan, out *Series, r int, v float64, sun *limit.Sun) {
	l := &p.Station.Limits
	switch q := s.quantity; q {
	case rules.Global, rules.Direct, rules.Diffuse, rules.Reflected:
		out.set(rules.Possible, r, limit.WithinSun(v, math.Min(l.Possible[q].Low, -s.zeroAllowance), l.Possible[q], sun))
		out.set(rules.Rare, r, limit.WithinSun(v, math.Min(l.Rare[q].Low, -s.zeroAllowance), l.Rare[q], sun))
		out.set(rules.NightZero, r, limit.NightZero(v, -l.Rare[q].Low, sun, l))
	case rules.UV:
		out.set(rules.Possible, r, limit.WithinSun(v, l.PossibleUV.Low, l.PossibleUV, sun))
		out.set(rules.NightZero, r, limit.NightZero(v, -l.PossibleUV.Low, sun, l))
	case rules.PAR:
		out.set(rules.Possible, r, limit.WithinSun(v, l.PossiblePAR.Low, l.PossiblePAR, sun))
		out.set(rules.NightZero, r, limit.NightZero(v, -l.PossiblePAR.Low, sun, l))
	case rules.LWDown, rules.LWUp:
		out.set(rules.Possible, r, limit.WithinBand(v, l.PossibleLW[q-rules.LWDown]))
		out.set(rules.Rare, r, limit.WithinBand(v, l.RareLW[q-rules.LWDown]))
	case rules.AirTemperature:
		out.set(rules.Possible, r, limit.WithinBand(v, rules.Band{Low: l.AirTemperatureMinC, High: l.AirTemperatureMaxC}))
	case rules.Humidity:
		out.set(rules.Possible, r, limit.WithinBand(v, rules.Band{Low: 0, High: 105})) // sensors read up to 5 % high in fog (common practice)
	case rules.Pressure:
		out.set(rules.Possible, r, limit.WithinBand(v, rules.Band{Low: 400, High: 1100})) // extremes at stations of 0 to 7000 m (common practice)
	case rules.WindSpeed:
		out.set(rules.Possible, r, limit.WithinBand(v, rules.Band{Low: 0, High: 115})) // strongest gust measured is 113 m/s (from memory)
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
	if math.IsNaN(s.Value[r]) {
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
	return s.Value[r]
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
		return s.Value
	}
	return p.nothing
}
