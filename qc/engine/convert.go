package engine

import (
	"math"

	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sensor"
	"fluxwarden/qc/uncertainty"
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
	budget   *uncertainty.Budget
}

func periodsOf(in *rules.Instrument) []calibrationPeriod {
	out := make([]calibrationPeriod, 0, len(in.Calibrations))
	for i := range in.Calibrations {
		c := &in.Calibrations[i]
		p := calibrationPeriod{from: minute.FloorDiv(c.From.Unix(), 60), to: math.MaxInt64, cal: c, budget: uncertainty.NewBudget(in, c)}
		if !c.To.IsZero() {
			p.to = minute.FloorDiv(c.To.Unix(), 60)
		}
		out = append(out, p)
	}
	return out
}

// at gives the calibration that holds in a minute, nil if none does, and the first minute from which that may be another.
func (s *seriesPlan) at(minuteUTC int64) (cal *rules.Calibration, until int64) {
	until = math.MaxInt64
	for i := range s.periods {
		switch p := &s.periods[i]; {
		case minuteUTC < p.from:
			until = min(until, p.from)
		case minuteUTC < p.to:
			return p.cal, p.to
		}
	}
	return nil, until
}

// convert turns rows [from, to) of the block into the series' own unit: Measured, SD, Min, Max, N, and the body temperatures of a
// pyrgeometer. A logger's mark counts as nothing sent.
func (s *seriesPlan) convert(out *Series, block *minute.Block, nothing, air []float64, from, to int) {
	out.forget(nothing, from, to)
	col := &block.Columns[s.signal]
	switch {
	case s.weather != nil:
		factor, offset := weatherUnit(s.weather.Unit)
		s.linear(out, col, scale{factor, 1, offset}, from, to)
		return
	case s.quantity.Longwave():
		s.bodies(out, block, from, to)
	}
	if s.instrument.Input.Irradiance != "" {
		s.linear(out, col, scale{1, 1, 0}, from, to)
		return
	}
	first := block.Day * minute.PerDay
	for r := from; r < to; {
		cal, until := s.at(first + int64(r))
		end := int(min(until, first+int64(to)) - first)
		switch {
		case cal == nil:
			s.uncalibrated(out, col, r, end)
		case s.quantity.Longwave():
			s.pyrgeometer(out, col, cal, r, end)
		case len(cal.TemperatureCoeff) > 0:
			s.warmed(out, block, cal, air, r, end)
		default:
			s.linear(out, col, scale{s.microvolts, cal.SensitivityUVPerW, -cal.ZeroWm2}, r, end)
		}
		r = end
	}
}

// responseReferenceC is the temperature that a certificate's sensitivity holds at, where it gives a temperature response.
const responseReferenceC = 20

// warmed converts rows of an instrument whose sensitivity depends on its temperature: on its own thermometer, or on the air where it has
// none. Where neither is there the sensitivity is taken as it is.
func (s *seriesPlan) warmed(out *Series, block *minute.Block, cal *rules.Calibration, air []float64, from, to int) {
	response := sensor.TemperatureResponse{ReferenceC: responseReferenceC}
	copy(response.Coefficients[:], cal.TemperatureCoeff)
	for r := from; r < to; r++ {
		t := air[r]
		if s.bodyCol >= 0 {
			t = temperatureC(block.Columns[s.bodyCol].Mean[r], s.instrument.Input.CaseUnit, &s.instrument.Input)
		}
		sens := cal.SensitivityUVPerW
		if f := response.FactorAt(t); !math.IsNaN(f) {
			sens *= f
		}
		s.linear(out, &block.Columns[s.signal], scale{s.microvolts, sens, -cal.ZeroWm2}, r, r+1)
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

// sent says whether a row of the channel holds a value; a mark is noted.
func (s *seriesPlan) sent(out *Series, col *minute.Column, r int) bool {
	v := col.Mean[r]
	if col.N[r] == 0 || v != v {
		return false
	}
	if s.isMark(v) {
		out.marked[r] = true
		return false
	}
	return true
}

// uncalibrated is for rows in which no calibration holds: a mark is noted, a signal is worth nothing.
func (s *seriesPlan) uncalibrated(out *Series, col *minute.Column, from, to int) {
	for r := from; r < to; r++ {
		s.sent(out, col, r)
	}
}

// A scale is value = per * signal / divisor + offset. For a thermopile it is sensor.Radiometer: per is the signal's unit in
// microvolts, divisor the sensitivity, offset the zero taken off.
type scale struct{ per, divisor, offset float64 }

func (c *scale) of(v float64) float64 { return float64(float64(v*c.per)/c.divisor) + c.offset }

// linear converts rows whose value is a straight line of the signal.
func (s *seriesPlan) linear(out *Series, col *minute.Column, c scale, from, to int) {
	sds, los, his, counts := col.SD[:to], col.Min[:to], col.Max[:to], col.N[:to]
	for r := from; r < to; r++ {
		v := col.Mean[r]
		if !(counts[r] != 0 && v > limit.MarkBelow && v < minute.NoMeasurementAbove) && !s.sent(out, col, r) {
			continue
		}
		out.N[r] = counts[r]
		mean := RoundIrradiance(c.of(v))
		out.Measured[r] = mean
		if lo, hi := los[r], his[r]; lo == v && hi == v { // one sample
			out.Min[r], out.Max[r] = mean, mean
		} else {
			out.span(r, c.of(lo), c.of(hi))
		}
		if sd := sds[r]; sd == sd {
			out.SD[r] = RoundIrradiance(math.Abs(float64(sd*c.per) / c.divisor))
		}
	}
	copy(out.Value[from:to], out.Measured[from:to])
}

// bodies converts the case and dome temperatures of a pyrgeometer.
func (s *seriesPlan) bodies(out *Series, block *minute.Block, from, to int) {
	if s.bodyCol >= 0 {
		body := block.Columns[s.bodyCol].Mean
		for r := from; r < to; r++ {
			out.bodyC[r] = temperatureC(body[r], s.instrument.Input.CaseUnit, &s.instrument.Input)
		}
	}
	if s.domeCol >= 0 {
		dome := block.Columns[s.domeCol].Mean
		for r := from; r < to; r++ {
			out.domeC[r] = temperatureC(dome[r], s.instrument.Input.DomeUnit, &s.instrument.Input)
		}
	}
}

// pyrgeometer converts a thermopile's voltage and the body temperatures by the form of Philipona et al. 1995.
func (s *seriesPlan) pyrgeometer(out *Series, col *minute.Column, cal *rules.Calibration, from, to int) {
	uv := s.microvolts
	form := sensor.Philipona{K1: cal.K1, K2: cal.K2, K3: cal.K3}
	coupled := s.domeCol < 0 || cal.K3 == 0 // the dome's temperature is not used, and may be broken
	response := sensor.TemperatureResponse{ReferenceC: responseReferenceC}
	copy(response.Coefficients[:], cal.TemperatureCoeff)
	for r := from; r < to; r++ {
		bodyC, domeC := out.bodyC[r], out.domeC[r]
		sens := cal.SensitivityUVPerW
		if f := response.FactorAt(bodyC); !math.IsNaN(f) {
			sens *= f
		}
		if coupled {
			domeC, out.domeC[r] = bodyC, math.NaN()
		}
		if !s.sent(out, col, r) {
			continue
		}
		out.net[r] = sensor.NetExchange(col.Mean[r]*uv, sens)
		of := func(v float64) float64 {
			return form.Flux(sensor.NetExchange(v*uv, sens), bodyC+sensor.ZeroCelsiusK, domeC+sensor.ZeroCelsiusK) - cal.ZeroWm2
		}
		v := of(col.Mean[r])
		if math.IsNaN(v) { // no body temperature: the flux is not known
			continue
		}
		out.N[r] = col.N[r]
		out.Measured[r] = RoundIrradiance(v)
		out.span(r, of(col.Min[r]), of(col.Max[r]))
		out.SD[r] = RoundIrradiance(math.Abs(col.SD[r] * uv / sens))
	}
	copy(out.Value[from:to], out.Measured[from:to])
}

// temperatureC is a body temperature in degrees C from the unit of its channel; NaN where the channel cannot mean one.
func temperatureC(v float64, unit string, in *rules.Input) float64 {
	if math.IsNaN(v) || limit.IsMark(v) {
		return math.NaN()
	}
	switch unit {
	case "K":
		return v - sensor.ZeroCelsiusK
	case "ohm_10k":
		return sensor.Thermistor10k.TemperatureK(v) - sensor.ZeroCelsiusK
	case "ohm_curve":
		curve := sensor.SteinhartHart{A: in.Thermistor[0], B: in.Thermistor[1], C: in.Thermistor[2]}
		return curve.TemperatureK(v) - sensor.ZeroCelsiusK
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
		return 1, -sensor.ZeroCelsiusK
	case "1":
		return 100, 0
	case "Pa":
		return 0.01, 0
	default:
		return 1, 0
	}
}

// span writes the least and the greatest of a row, whichever way round they come.
func (out *Series) span(r int, lo, hi float64) {
	if hi < lo {
		lo, hi = hi, lo
	}
	out.Min[r], out.Max[r] = RoundIrradiance(lo), RoundIrradiance(hi)
}

// forget empties rows [from, to). Outcomes and the sets of tests are not touched: every test writes every row.
func (out *Series) forget(nothing []float64, from, to int) {
	for _, c := range [...][]float64{out.Measured, out.Value, out.SD, out.Min, out.Max, out.U95, out.net, out.bodyC, out.domeC} {
		if c != nil {
			copy(c[from:to], nothing)
		}
	}
	clear(out.N[from:to])
	clear(out.Faults[from:to])
	clear(out.Verdict[from:to]) // rules.Absent
	clear(out.Restored[from:to])
	clear(out.marked[from:to])
}
