package engine

import (
	"math"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/uncertainty"
	"fluxwarden/rules"
)

// spreadPerUnit is the resolution that uncertainties are stored in: 1/32 of the quantity's unit.
const spreadPerUnit = 32

func roundSpread(v float64) float64 {
	return float64(math.RoundToEven(v*spreadPerUnit) / spreadPerUnit)
}

// uncertainty fills U95 of rows [from, to), of what was measured. It needs the rows' tests: a value that has failed on its own says nothing of
// the beam or of the net longwave beside another.
func (p *Plan) uncertainty(j *Judged, from, to int) {
	p.beams(j, from, to)
	for i := range p.series {
		s, out := &p.series[i], &j.Series[i]
		if s.instrument == nil {
			continue
		}
		beside := p.besideOf(j, out)
		first := j.Day * minute.PerDay
		for r := from; r < to; {
			budget, c, until := s.budgetAt(first + int64(r))
			end := int(min(until, first+int64(to)) - first) // until may be the greatest number there is
			if budget == nil {
				copy(out.soundU95[r:end], p.nothing)
			} else {
				budgetRows(j, out, &beside, budget, &c, r, end)
			}
			r = end
		}
		copy(out.U95[from:to], out.soundU95[from:to])
	}
}

// budgetRows fills rows [from, to) of a series under one budget.
func budgetRows(j *Judged, out *Series, beside *netBeside, budget *uncertainty.Budget, c *uncertainty.Conditions, from, to int) {
	u95 := out.soundU95[:to]
	for r, v := range out.Measured[:to] {
		if r < from {
			continue
		}
		if v != v {
			u95[r] = v
			continue
		}
		c.Value = v
		minuteConditions(j, out, beside, r, c)
		u95[r] = roundSpread(budget.U95(c))
	}
}

// A netBeside is where the net longwave of a series is told: its own for a pyrgeometer, else that of the one that looks the same way.
type netBeside struct {
	net    []float64       // no value where nothing tells it
	missed []rules.TestSet // of the pyrgeometer beside; nil for a series' own
}

func (p *Plan) besideOf(j *Judged, s *Series) netBeside {
	if s.Quantity.Longwave() {
		return netBeside{net: s.net}
	}
	q := rules.LWDown
	if s.Quantity == rules.Reflected {
		q = rules.LWUp
	}
	if l := p.primarySeries(j, q); l != nil {
		return netBeside{l.net, l.Missed}
	}
	return netBeside{net: p.nothing}
}

// budgetAt gives the budget that holds in a minute, nil if none does, its conditions with the age of the calibration filled in, and the first
// minute from which they may be others. The age counts whole days, so that it does not hang on where a day is split.
func (s *seriesPlan) budgetAt(minuteUTC int64) (b *uncertainty.Budget, c uncertainty.Conditions, until int64) {
	until = math.MaxInt64
	for i := range s.periods {
		switch p := &s.periods[i]; {
		case minuteUTC < p.from:
			until = min(until, p.from)
		case minuteUTC < p.to:
			days := minute.FloorDiv(minuteUTC, minute.PerDay) - minute.FloorDiv(p.from, minute.PerDay)
			return p.budget, uncertainty.Conditions{Years: float64(days) / 365.25}, p.to
		}
	}
	return s.unstated, uncertainty.Conditions{Years: math.NaN()}, until
}

// minuteConditions fills in what a minute's uncertainty depends on beside the value and the calibration.
func minuteConditions(j *Judged, s *Series, beside *netBeside, r int, c *uncertainty.Conditions) {
	c.SD, c.N = s.SD[r], s.N[r]
	c.BeamWm2, c.CosZenith = j.beam[r], j.CosZenith[r]
	c.NetWm2 = beside.net[r]
	if beside.missed != nil && beside.missed[r]&(rules.Signal.Of()|rules.Possible.Of()) != 0 {
		c.NetWm2 = math.NaN()
	}
	if s.bodyC != nil {
		c.BodyC, c.DomeC = s.bodyC[r], s.domeC[r]
	}
}

// beams works out the direct normal irradiance of rows [from, to) that uncertainties are worked out with: the measured one; where closure
// misses or none is measured, what global says, whichever is more; where nothing of the sun is measured, what a cloudless sky may give.
func (p *Plan) beams(j *Judged, from, to int) {
	direct, global := p.primarySeries(j, rules.Direct), p.primarySeries(j, rules.Global)
	for r := from; r < to; r++ {
		sun := &j.sun.rows[r]
		if !(sun.BeamMu > 0) {
			j.beam[r] = 0
			continue
		}
		b := partner(direct, r)
		if b == b && !direct.Missed[r].Has(rules.Closure) {
			j.beam[r] = max(b, 0)
			continue
		}
		g := partner(global, r)
		switch {
		case g == g:
			split := uncertainty.BeamOfGlobal(g, sun.BeamMu, sun.SaWm2)
			if !(b > split) {
				b = split
			}
		case b != b && !sun.Hidden:
			b = uncertainty.BeamAtMost(sun.BeamMu, sun.SaWm2)
		}
		j.beam[r] = max(orNothing(b), 0)
	}
}

func orNothing(v float64) float64 {
	if v != v {
		return 0
	}
	return v
}

// restoredU95 is the uncertainty of a value that an episode let restore.
func (p *Plan) restoredU95(j *Judged, series, r int, e *fault.Episode, restored float64) float64 {
	budget, c, _ := p.series[series].budgetAt(j.Day*minute.PerDay + int64(r))
	if budget == nil {
		return math.NaN()
	}
	c.Value = restored
	beside := p.besideOf(j, &j.Series[series])
	minuteConditions(j, &j.Series[series], &beside, r, &c)
	correction := 0.0
	if e.Kind == rules.ZeroOffset {
		correction = restored - j.Series[series].Measured[r]
	}
	return roundSpread(budget.Restored(&c, correction))
}

// Uncertainty gives what U95 of a prepared row was worked out from: the budget of the instrument and the conditions of the minute, with the
// value that was measured. Budget is nil where no calibration holds, for weather, and for an instrument that the station does not have.
func (p *Plan) Uncertainty(j *Judged, instrument string, row int) (*uncertainty.Budget, uncertainty.Conditions) {
	for i := range p.series {
		if s := &p.series[i]; s.instrument != nil && s.id == instrument {
			budget, c, _ := s.budgetAt(j.Day*minute.PerDay + int64(row))
			c.Value = j.Series[i].Measured[row]
			beside := p.besideOf(j, &j.Series[i])
			minuteConditions(j, &j.Series[i], &beside, row, &c)
			return budget, c
		}
	}
	return nil, uncertainty.Conditions{Value: math.NaN()}
}

// unstatedBudget is of minutes that no calibration covers: a voltage is worth nothing then, a logger that converts has one of its own.
func unstatedBudget(in *rules.Instrument) *uncertainty.Budget {
	if in.Input.Irradiance == "" {
		return nil
	}
	return uncertainty.NewBudget(in, nil)
}
