package synth

import (
	"math"
	"strings"

	"fluxwarden/qc/minute"
	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

// sensed is what one instrument gave over one record, in microvolts or its own unit; NaN where there is no signal.
type sensed struct {
	mean, sd, least, most float64
	bodyC, domeC          float64
}

// statisticsFrom is the number of looks from which on the logger sends their statistics, not the mean alone.
const statisticsFrom = samplesMax

func (s *Station) record(at minute.Stamp, faulty bool) minute.Reading {
	out := minute.Reading{At: at}
	start := s.start(at)
	if faulty && s.faultAt(start, rules.DataGap) != nil {
		return out
	}
	all, air, looked := s.sense(start, faulty)
	if faulty {
		s.freeze(all, start)
		s.swap(all, start)
	}
	for i := range s.instruments {
		out.Values = s.appendInstrument(out.Values, i, &all[i])
	}
	for _, in := range s.rules.Weather {
		out.Values = append(out.Values, minute.ChannelValue{Channel: in.Channel, Value: minute.Single(inWeatherUnit(air.quantity(in.Quantity), in.Unit))})
	}
	for _, in := range s.rules.Housekeeping {
		v := s.housekeeping(&in, looked, start, faulty)
		out.Values = append(out.Values, minute.ChannelValue{Channel: in.Channel, Value: minute.Single(v)})
	}
	return out
}

// sense lets every instrument look at the sky for the length of a record. It also gives the mean air, and when it looked.
func (s *Station) sense(start minute.Stamp, faulty bool) (all []sensed, air now, looked minute.Stamp) {
	looked = start
	if f := s.faultAt(start, rules.ClockShift); faulty && f != nil {
		looked -= minute.Stamp(f.Amount * minute.MicrosPerSecond)
	}
	all = make([]sensed, len(s.instruments))
	sums := make([]moments, len(s.instruments))
	for k := range s.samples {
		t := s.sampleTime(looked, k)
		n := s.skyAt(t)
		air.addAir(&n, float64(s.samples))
		bodyC, domeC := bodies(&n)
		for i := range s.instruments {
			d := &s.instruments[i]
			e := s.effectsOn(i, &n, start, faulty)
			sums[i].add(s.respond(d, &n, &e, t))
			all[i].bodyC += (bodyC + e.bodyAddK) / float64(s.samples)
			all[i].domeC += domeC / float64(s.samples)
			if e.lost {
				sums[i].lost = true
			}
		}
	}
	for i := range all {
		sums[i].into(&all[i])
	}
	return all, air, looked
}

// respond is the output with the response time in it. The exponential memory of a thermopile is integrated with two points
// (Gauss-Laguerre), so it needs no past reading. Over the mean of a longer record it changes nothing and is left out.
func (s *Station) respond(d *device, n *now, e *effects, t minute.Stamp) float64 {
	if s.samples > 1 || s.interval > 5*minute.MicrosPerSecond {
		return d.output(n, e)
	}
	micros := d.tauSeconds * minute.MicrosPerSecond
	near, far := s.skyAt(t-minute.Stamp(0.5857864376269049*micros)), s.skyAt(t-minute.Stamp(3.414213562373095*micros))
	lagged := *n
	for _, p := range []struct{ to, near, far *float64 }{{&lagged.direct, &near.direct, &far.direct}, {&lagged.diffuse, &near.diffuse, &far.diffuse},
		{&lagged.reflected, &near.reflected, &far.reflected}, {&lagged.lwDown, &near.lwDown, &far.lwDown}, {&lagged.lwUp, &near.lwUp, &far.lwUp}} {
		*p.to = float64(0.8535533905932737**p.near) + float64(0.1464466094067262**p.far)
	}
	return d.output(&lagged, e)
}

// moments gather the samples of one record.
type moments struct {
	sum, squares, least, most float64
	n                         int
	lost                      bool
}

func (m *moments) add(v float64) {
	if m.n == 0 {
		m.least, m.most = v, v
	}
	m.least, m.most = math.Min(m.least, v), math.Max(m.most, v)
	m.sum += v
	m.squares += float64(v * v)
	m.n++
}

func (m *moments) into(out *sensed) {
	if m.lost {
		out.mean, out.sd, out.least, out.most = math.NaN(), math.NaN(), math.NaN(), math.NaN()
		return
	}
	count := float64(m.n)
	out.mean, out.least, out.most = m.sum/count, m.least, m.most
	if m.n > 1 {
		out.sd = math.Sqrt(math.Max(0, m.squares-float64(m.sum*m.sum)/count) / (count - 1))
	}
}

// addAir gathers the means of the weather.
func (n *now) addAir(of *now, count float64) {
	n.airC += of.airC / count
	n.humidityPct += of.humidityPct / count
	n.pressureHPa += of.pressureHPa / count
	n.windMs += of.windMs / count
}

// appendInstrument writes an instrument's channels in the units that the site file gives, rounded as a logger rounds.
func (s *Station) appendInstrument(values []minute.ChannelValue, i int, v *sensed) []minute.ChannelValue {
	in := &s.rules.Instruments[i].Input
	channel, per, steps := in.Irradiance, 1.0, 100.0
	if in.Signal != "" {
		channel, per = in.Signal, microvoltsPer(in.SignalUnit)
		steps = 10 * per // a tenth of a microvolt
	}
	if !math.IsNaN(v.mean) {
		value := minute.Single(resolved(v.mean/per, steps))
		if s.samples >= statisticsFrom {
			value = minute.Value{Mean: value.Mean, SD: resolved(v.sd/per, steps), Min: resolved(v.least/per, steps), Max: resolved(v.most/per, steps), N: int32(s.samples)}
		}
		values = append(values, minute.ChannelValue{Channel: channel, Value: value})
	}
	for _, t := range []struct {
		channel, unit string
		celsius       float64
	}{{in.Case, in.CaseUnit, v.bodyC}, {in.Dome, in.DomeUnit, v.domeC}} {
		if t.channel == "" {
			continue
		}
		if x := inBodyUnit(t.celsius, t.unit, in); !math.IsNaN(x) {
			values = append(values, minute.ChannelValue{Channel: t.channel, Value: minute.Single(x)})
		}
	}
	return values
}

func inBodyUnit(celsius float64, unit string, in *rules.Input) float64 {
	switch unit {
	case "K":
		return resolved(celsius+sensor.ZeroCelsiusK, 1000)
	case "ohm_10k":
		return resolved(sensor.Thermistor10k.ResistanceOhm(celsius+sensor.ZeroCelsiusK), 10)
	case "ohm_curve":
		curve := sensor.SteinhartHart{A: in.Thermistor[0], B: in.Thermistor[1], C: in.Thermistor[2]}
		return resolved(curve.ResistanceOhm(celsius+sensor.ZeroCelsiusK), 10)
	case "ohm_pt100":
		return resolved(sensor.PlatinumOhm(celsius, 100), 10000)
	}
	return resolved(celsius, 1000)
}

func inWeatherUnit(v float64, unit string) float64 {
	switch unit {
	case "K":
		return resolved(v+sensor.ZeroCelsiusK, 100)
	case "1":
		return resolved(v/100, 10000)
	case "Pa":
		return resolved(100*v, 1)
	}
	return resolved(v, 100)
}

// housekeeping is a channel about the equipment, known by the name that the site file gives it.
func (s *Station) housekeeping(in *rules.HousekeepingInput, looked, start minute.Stamp, faulty bool) float64 {
	wander := s.chance.equipment.named(in.Channel).smooth(float64(looked)/minute.MicrosPerSecond, 600)
	switch {
	case strings.Contains(in.Name, "fan"):
		if faulty && s.faultAt(start, rules.VentilationLost) != nil {
			return 0
		}
		return resolved(2400+float64(25*wander), 1)
	case strings.Contains(in.Name, "tracker"):
		if f := s.faultAt(start, rules.PointingLost); faulty && f != nil && f.Amount == 0 {
			return 0
		}
		return 1
	case strings.Contains(in.Name, "supply"):
		return resolved(12.9+float64(0.2*wander), 100)
	case !math.IsNaN(in.Low) && !math.IsNaN(in.High):
		return resolved((in.Low+in.High)/2, 100)
	}
	return 1
}
