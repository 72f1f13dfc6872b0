package engine

import (
	"math"

	"fluxwarden/qc/minute"
	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

// This file takes the thermal offset out of pyranometers: a dome that radiates to a cold sky cools the detector's surroundings, and the
// signal is some W/m2 low (Dutton et al. 2001, J. Atmos. Oceanic Technol. 18, 297). It is fitted on the station's own nights against the
// pyrgeometer beside, and taken off by day and night. The measured value is kept, and tests and diagnosis look at that one.

const (
	// offsetNightZenithDeg: the sun is below -10 degrees.
	offsetNightZenithDeg = 100
	// offsetAgingWm2 is how much less sure a fit is for each day since its last night: standard uncertainty, W/m2 (own choice: 1 W/m2 in
	// the fifty nights without darkness that 60 degrees north has).
	offsetAgingWm2 = 0.02
	// offsetAgeMaxDays is how long a fit is carried at all: a polar summer.
	offsetAgeMaxDays = 180
	// offsetPerWm2 is the resolution of what goes into the sums, so that they are exact.
	offsetPerWm2 = 64
)

// OffsetFacts is what a day's night minutes say of one instrument's thermal offset, and the fit that the next day starts from.
type OffsetFacts struct {
	Instrument string            `json:"instrument"`
	Sums       sensor.OffsetSums `json:"sums"`
	Fit        *OffsetFit        `json:"fit,omitempty"` // nil before the first
}

// An OffsetFit is a fit, quantised, and the last day of the nights that it rests on.
type OffsetFit struct {
	B0  float64 `json:"b0"`
	B1  float64 `json:"b1"`
	B2  float64 `json:"b2"`
	SD  float64 `json:"sd"` // of the residuals, W/m2
	Day int64   `json:"day"`
}

// An offsetState is one instrument's on the day begun.
type offsetState struct {
	series int
	fit    *OffsetFit
	sdWm2  float64 // standard uncertainty of the fit on this day
	sums   sensor.OffsetSums
}

// planOffsets finds the series whose thermal offset is taken out.
func (p *Plan) planOffsets() {
	for i := range p.series {
		if s := &p.series[i]; s.instrument != nil && p.Station.TakesOffset(s.instrument) {
			p.offsets = append(p.offsets, i)
		}
	}
}

// beginOffsets fits on the nights of the HistoryDays before the day; where they are too few the last fit is carried.
func (j *Judger) beginOffsets(day int64) {
	j.offsets = j.offsets[:0]
	for _, k := range j.plan.offsets {
		o := offsetState{series: k}
		id := j.plan.series[k].id
		var sums sensor.OffsetSums
		var carried *OffsetFit
		last := int64(0)
		for i := range j.history {
			h := &j.history[i]
			if h.Day >= day {
				break
			}
			for f := range h.Offsets {
				facts := &h.Offsets[f]
				if facts.Instrument != id {
					continue
				}
				carried = facts.Fit
				if h.Day >= day-HistoryDays && facts.Sums.N > 0 {
					sums.Merge(&facts.Sums)
					last = h.Day
				}
			}
		}
		if fit, err := sums.Fit(); err == nil && fit.Plausible() {
			carried = &OffsetFit{quantised(fit.B0, 1<<12), quantised(fit.B1, 1<<20), quantised(fit.B2, 1<<20), quantised(fit.ResidualSDWm2, 1<<12), last}
		}
		if carried != nil && day-carried.Day <= offsetAgeMaxDays {
			o.fit = carried
			aged := offsetAgingWm2 * float64(day-carried.Day)
			o.sdWm2 = math.Sqrt(float64(carried.SD*carried.SD) + float64(aged*aged))
		}
		j.offsets = append(j.offsets, o)
	}
}

func quantised(v, steps float64) float64 { return float64(math.RoundToEven(v*steps)/steps) + 0 }

// takeOffsets works out the offsets of a row and takes the night's minutes into the sums. It stands behind the diagnosis.
func (j *Judger) takeOffsets(r int) {
	d := j.judged
	net, dome := j.plan.infraredAt(d, r)
	night := d.ApparentZenithDeg[r] > offsetNightZenithDeg
	for i := range j.offsets {
		o := &j.offsets[i]
		s := &d.Series[o.series]
		s.offset[r], s.offsetU95[r] = math.NaN(), math.NaN()
		if net != net || s.Measured[r] != s.Measured[r] {
			continue
		}
		if night && s.Missed[r] == 0 && !(s.Primary && j.watcher.Tainted(s.Quantity)) && !j.watcher.Tainted(rules.LWDown) {
			o.sums.Add(s.Measured[r], net, dome)
		}
		if o.fit == nil {
			continue
		}
		off := float64(o.fit.B0) + float64(o.fit.B1*net) + float64(o.fit.B2*dome)
		most := rules.ClassZeroWm2(j.plan.series[o.series].instrument.Class, s.Quantity)
		s.offset[r] = RoundIrradiance(max(-most, min(off, most)))
		s.offsetU95[r] = j.plan.offsetU95(d, o, r)
	}
}

// infraredAt is the net longwave of the pyrgeometer beside and the dome's term, W/m2, both rounded; the net is NaN where it is not known or
// the pyrgeometer has failed on its own.
func (p *Plan) infraredAt(d *Judged, r int) (net, dome float64) {
	l := p.primarySeries(d, rules.LWDown)
	if l == nil || partner(l, r) != partner(l, r) || l.Missed[r].Has(rules.Stuck) {
		return math.NaN(), 0
	}
	if net = l.net[r]; net != net {
		net = l.Measured[r] - sensor.BlackbodyFlux(l.bodyC[r]+sensor.ZeroCelsiusK)
	}
	if domeC := l.domeC[r]; domeC == domeC {
		dome = sensor.BlackbodyFlux(domeC+sensor.ZeroCelsiusK) - sensor.BlackbodyFlux(l.bodyC[r]+sensor.ZeroCelsiusK)
	}
	return quantised(net, offsetPerWm2), quantised(dome, offsetPerWm2)
}

// offsetU95 is the uncertainty of a value whose offset was taken out.
func (p *Plan) offsetU95(d *Judged, o *offsetState, r int) float64 {
	s := &d.Series[o.series]
	budget, c, _ := p.series[o.series].budgetAt(d.Day*minute.PerDay + int64(r))
	if budget == nil {
		return math.NaN()
	}
	c.Value = s.Measured[r]
	beside := p.besideOf(d, s)
	minuteConditions(d, s, &beside, r, &c)
	return roundSpread(budget.OffsetCorrected(&c, o.sdWm2))
}

// offsetFacts is what the day hands on.
func (j *Judger) offsetFacts() []OffsetFacts {
	var out []OffsetFacts
	for i := range j.offsets {
		o := &j.offsets[i]
		out = append(out, OffsetFacts{Instrument: j.plan.series[o.series].id, Sums: o.sums, Fit: o.fit})
	}
	return out
}

// withoutOffset takes the offsets off the measured values of the judged rows.
func (s *Series) withoutOffset(rows int) {
	for r, off := range s.offset[:rows] {
		if off == off && s.Measured[r] == s.Measured[r] {
			s.Value[r] = RoundIrradiance(s.Measured[r] - off)
			s.U95[r] = s.offsetU95[r]
		}
	}
}
