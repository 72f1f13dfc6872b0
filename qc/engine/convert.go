package engine

import (
	"math"

	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

// signalMicrovolts is what one unit of a signal channel is in microvolts.
func signalMicrovolts(unit string) float64 {
	switch unit {
	case "V":
		return 1e6
	case "uV":
		return 1
	default:
		return 1e3
	}
}

// A calibrationPeriod is one entry of a calibration history in minutes since 1970.
type calibrationPeriod struct {
	from, to int64
	cal      *rules.Calibration
}

func periodsOf(in *rules.Instrument) []calibrationPeriod {
	out := make([]calibrationPeriod, 0, len(in.Calibrations))
	for i := range in.Calibrations {
		c := &in.Calibrations[i]
		p := calibrationPeriod{from: minute.FloorDiv(c.From.Unix(), 60), to: math.MaxInt64, cal: c}
		if !c.To.IsZero() {
			p.to = minute.FloorDiv(c.To.Unix(), 60)
		}
		out = append(out, p)
	}
	return out
}

// at gives the calibration that holds in a minute, nil if none does.
func (s *seriesPlan) at(minuteUTC int64) *rules.Calibration {
	for i := range s.periods {
		if p := &s.periods[i]; minuteUTC >= p.from && minuteUTC < p.to {
			return p.cal
		}
	}
	return nil
}

// convert turns rows [from, to) of the block into the series' own unit: Measured, SD, Min, Max, N, and the body temperatures of a
// pyrgeometer. A logger's mark counts as nothing sent.
func (s *seriesPlan) convert(out *Series, block *minute.Block, from, to int) {
	col := &block.Columns[s.signal]
	first := block.Day * minute.PerDay
	var body, dome *minute.Column
	if s.bodyCol >= 0 {
		body = &block.Columns[s.bodyCol]
	}
	if s.domeCol >= 0 {
		dome = &block.Columns[s.domeCol]
	}
	for r := from; r < to; r++ {
		out.clearRow(r)
		if body != nil {
			out.bodyC[r] = temperatureC(body.Mean[r], s.instrument.Input.CaseUnit)
		}
		if dome != nil {
			out.domeC[r] = temperatureC(dome.Mean[r], s.instrument.Input.DomeUnit)
		}
		v := col.Mean[r]
		if col.N[r] == 0 || math.IsNaN(v) {
			continue
		}
		if s.isMark(v) {
			out.marked[r] = true
			continue
		}
		out.N[r] = col.N[r]
		if s.weather != nil {
			factor, offset := weatherUnit(s.weather.Unit)
			out.store(r, float64(v*factor)+offset, col.SD[r]*factor, float64(col.Min[r]*factor)+offset, float64(col.Max[r]*factor)+offset)
			continue
		}
		if s.instrument.Input.Irradiance != "" {
			out.store(r, v, col.SD[r], col.Min[r], col.Max[r])
			continue
		}
		cal := s.at(first + int64(r))
		if cal == nil {
			out.N[r] = 0
			continue
		}
		s.fromSignal(out, cal, col, r)
	}
}

// isMark says whether a channel's value is a logger's mark. A reversed thermopile may well give -7000 microvolts, so there only
// the marks themselves count.
func (s *seriesPlan) isMark(v float64) bool {
	if s.microvolts == 1 {
		return minute.IsMark(v)
	}
	return limit.IsMark(v)
}

// fromSignal converts one row of a thermopile's voltage.
func (s *seriesPlan) fromSignal(out *Series, cal *rules.Calibration, col *minute.Column, r int) {
	uv := s.microvolts
	sens := cal.SensitivityUVPerW
	sd := math.Abs(col.SD[r] * uv / sens)
	if !s.quantity.Longwave() {
		radiometer := sensor.Radiometer{SensitivityUVPerWm2: sens, ZeroOffsetWm2: cal.ZeroWm2}
		of := func(v float64) float64 { return radiometer.Irradiance(v*uv/1000, 0) }
		out.store(r, of(col.Mean[r]), sd, of(col.Min[r]), of(col.Max[r]))
		return
	}
	bodyC, domeC := out.bodyC[r], out.domeC[r]
	if s.domeCol < 0 || cal.K3 == 0 { // without a coefficient for it the dome's temperature is not used, and may be broken
		domeC, out.domeC[r] = bodyC, math.NaN()
	}
	out.net[r] = sensor.NetExchange(col.Mean[r]*uv, sens)
	form := sensor.Philipona{K1: cal.K1, K2: cal.K2, K3: cal.K3}
	of := func(v float64) float64 {
		return form.Flux(sensor.NetExchange(v*uv, sens), bodyC+limit.ZeroCelsiusK, domeC+limit.ZeroCelsiusK) - cal.ZeroWm2
	}
	v := of(col.Mean[r])
	if math.IsNaN(v) { // no body temperature: the flux is not known
		out.N[r] = 0
		return
	}
	out.store(r, v, sd, of(col.Min[r]), of(col.Max[r]))
}

// temperatureC is a body temperature in degrees C from the unit of its channel; NaN where the channel cannot mean one.
func temperatureC(v float64, unit string) float64 {
	if math.IsNaN(v) || limit.IsMark(v) {
		return math.NaN()
	}
	switch unit {
	case "K":
		return v - limit.ZeroCelsiusK
	case "ohm_10k":
		return sensor.Thermistor10k.TemperatureK(v) - limit.ZeroCelsiusK
	case "ohm_pt100":
		return sensor.PlatinumC(v, 100)
	default:
		return v
	}
}

// weatherUnit gives value = factor * v + offset in the unit that the archive stores.
func weatherUnit(unit string) (factor, offset float64) {
	switch unit {
	case "K":
		return 1, -limit.ZeroCelsiusK
	case "1":
		return 100, 0
	case "Pa":
		return 0.01, 0
	default:
		return 1, 0
	}
}

// store writes one row, rounded to the stored resolution.
func (out *Series) store(r int, mean, sd, lo, hi float64) {
	out.Measured[r] = RoundIrradiance(mean)
	out.Value[r] = out.Measured[r]
	out.SD[r] = RoundIrradiance(sd)
	if hi < lo {
		lo, hi = hi, lo
	}
	out.Min[r], out.Max[r] = RoundIrradiance(lo), RoundIrradiance(hi)
}

// clearRow forgets what a row said.
func (out *Series) clearRow(r int) {
	nan := math.NaN()
	out.Measured[r], out.Value[r], out.SD[r], out.Min[r], out.Max[r], out.U95[r] = nan, nan, nan, nan, nan, nan
	out.N[r], out.Missed[r], out.Passed[r], out.Faults[r], out.Verdict[r], out.Restored[r] = 0, 0, 0, 0, rules.Absent, false
	out.marked[r] = false
	if out.net != nil {
		out.net[r], out.bodyC[r], out.domeC[r] = nan, nan, nan
	}
}
