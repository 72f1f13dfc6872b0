package engine

import (
	"fluxwarden/qc/uncertainty"
	"fluxwarden/rules"
)

// This file corrects what the site file states of an instrument's optics, before the tests: the share of the sky that a shade ring hides
// with the sun, and the response of a pyranometer to a beam aslant. The value before it is kept as Uncorrected.

// correctOptics corrects rows [from, to).
func (p *Plan) correctOptics(j *Judged, from, to int) {
	for i := range p.series {
		s, out := &p.series[i], &j.Series[i]
		if out.Uncorrected == nil {
			continue
		}
		copy(out.Uncorrected[from:to], out.Measured[from:to])
		if len(s.instrument.ShadeRing) > 0 {
			f := s.instrument.ShadeRing[0]
			if len(s.instrument.ShadeRing) == 12 {
				f = s.instrument.ShadeRing[monthOf(j.Day)]
			}
			for r := from; r < to; r++ {
				out.Measured[r], out.Min[r], out.Max[r] = RoundIrradiance(out.Measured[r]*f), RoundIrradiance(out.Min[r]*f), RoundIrradiance(out.Max[r]*f)
				out.SD[r] = RoundIrradiance(out.SD[r] * f)
			}
		} else {
			p.straighten(j, out, s.instrument.Directional, from, to)
		}
		copy(out.Value[from:to], out.Measured[from:to])
	}
}

// straighten takes out what the directional response adds to the beam: beam * mu * (response - 1), with the beam of the pyrheliometer, or
// what global says of it. The sky's light is left as it is.
func (p *Plan) straighten(j *Judged, out *Series, table [][2]float64, from, to int) {
	direct := p.primarySeries(j, rules.Direct)
	for r := from; r < to; r++ {
		sun := &j.sun.rows[r]
		v := out.Measured[r]
		if !(sun.BeamMu > 0) || v != v {
			continue
		}
		var beam float64
		if direct != nil && direct.Measured[r] >= 0 && direct.Measured[r] <= sun.SaWm2 {
			beam = direct.Measured[r]
		} else {
			beam = uncertainty.BeamOfGlobal(v, sun.BeamMu, sun.SaWm2)
		}
		if off := float64(beam * sun.BeamMu * (responseAt(table, sun.ApparentZenithDeg) - 1)); off == off {
			out.Measured[r], out.Min[r], out.Max[r] = RoundIrradiance(v-off), RoundIrradiance(out.Min[r]-off), RoundIrradiance(out.Max[r]-off)
		}
	}
}

// responseAt is a table's value at an angle, straight between its corners and level beyond them.
func responseAt(table [][2]float64, zenithDeg float64) float64 {
	for i, c := range table {
		if zenithDeg > c[0] {
			continue
		}
		if i == 0 {
			return c[1]
		}
		b := table[i-1]
		return b[1] + float64((c[1]-b[1])*((zenithDeg-b[0])/(c[0]-b[0])))
	}
	return table[len(table)-1][1]
}

// monthOf is 0 in January.
func monthOf(day int64) int {
	ends := [12]int{31, 59, 90, 120, 151, 181, 212, 243, 273, 304, 334, 365}
	d := dayOfYear(day)
	leap := 0
	if dayOfYear(day-int64(d)) == 365 && dayOfYear(day-int64(d)+366) == 366 { // the last day of this year is its 366th
		leap = 1
	}
	for m, end := range ends {
		if m > 0 {
			end += leap
		}
		if d <= end {
			return m
		}
	}
	return 11
}
