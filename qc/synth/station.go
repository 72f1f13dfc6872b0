package synth

import (
	"math"
	"time"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sun"
	"fluxwarden/rules"
)

// A Station is a synthetic station. It is not for use by two goroutines at once: it keeps what two neighbouring minutes share.
type Station struct {
	rules           *rules.Station
	climate         Climate
	site            sun.Site
	horizon         sun.Horizon
	meanPressureHPa float64
	interval        minute.Stamp
	samples         int // looked at within one record
	instruments     []device
	faults          []activeFault
	chance          chances

	day        sun.Day
	dayMade    bool
	eclipse    sun.Eclipse
	kept       [2]slow
	keptMinute [2]int64
}

// chances are the sources of what is left to chance, one a purpose.
type chances struct {
	air, dew, pressure, wind, aerosol    source
	regime, regimeFast, depth, equipment source
	field                                [len(fieldScalesSeconds)]source
}

// sampleEvery is how often a logger that averages over a record looks.
const (
	sampleEvery      = 5 * time.Second
	samplesMax       = 12
	seaLevelHPa      = 1013.25
	standardSeaK     = 288.15
	standardExponent = 5.2559
)

// New makes a station of the rules' kind. The station must hold what a site file that was read without problems gives.
func New(station *rules.Station, seed uint64, climate Climate) *Station {
	s := &Station{rules: station, climate: climate,
		site:     sun.Site{LatitudeDeg: station.LatitudeDeg, LongitudeDeg: station.LongitudeDeg, ElevationM: station.ElevationM},
		interval: minute.Stamp(station.Time.Interval / time.Microsecond), keptMinute: [2]int64{math.MinInt64, math.MinInt64}}
	s.meanPressureHPa = seaLevelHPa * exact.Pow(1-lapseKPerM*station.ElevationM/standardSeaK, standardExponent)
	pairs := make([][2]float64, 0, len(station.Horizon))
	for _, p := range station.Horizon {
		pairs = append(pairs, [2]float64{p.AzimuthDeg, p.ElevationDeg})
	}
	s.horizon, _ = sun.NewHorizon(pairs) // the site file's reader has refused what it would refuse
	s.samples = int(min(max(station.Time.Interval/sampleEvery, 1), samplesMax))
	root := source(mix(seed)).named(station.ID)
	c := &s.chance
	for _, p := range []struct {
		to   *source
		name string
	}{{&c.air, "air"}, {&c.dew, "dew"}, {&c.pressure, "pressure"}, {&c.wind, "wind"}, {&c.aerosol, "aerosol"}, {&c.regime, "regime"},
		{&c.regimeFast, "regime_fast"}, {&c.depth, "depth"}, {&c.equipment, "equipment"}} {
		*p.to = root.named(p.name)
	}
	for i := range c.field {
		c.field[i] = root.named("field").named(string(rune('a' + i)))
	}
	for i := range station.Instruments {
		s.instruments = append(s.instruments, newDevice(&station.Instruments[i], root))
	}
	return s
}

// Rules is what the station was made from.
func (s *Station) Rules() *rules.Station { return s.rules }

// Interval is the time between two records, in microseconds.
func (s *Station) Interval() minute.Stamp { return s.interval }

// Next is the first stamp at or after a time that the station's logger writes.
func (s *Station) Next(at minute.Stamp) minute.Stamp {
	return minute.Stamp(-minute.FloorDiv(-int64(at), int64(s.interval))) * s.interval
}

// start is the beginning of the time that a record with this stamp stands for.
func (s *Station) start(at minute.Stamp) minute.Stamp {
	if s.rules.Time.LabelEnd {
		return at - s.interval
	}
	return at
}

// Reading is what the station sends under a stamp, its faults in. It has no values while nothing is sent.
func (s *Station) Reading(at minute.Stamp) minute.Reading { return s.record(at, true) }

// Sound is what it would send had it no faults.
func (s *Station) Sound(at minute.Stamp) minute.Reading { return s.record(at, false) }

// True is what really was: for each instrument, in the site file's order, the mean of its quantity over the record in its own
// unit, without any error of the instrument.
func (s *Station) True(at minute.Stamp) []float64 {
	out := make([]float64, len(s.instruments))
	start := s.start(at)
	for k := range s.samples {
		n := s.skyAt(s.sampleTime(start, k))
		for i := range s.instruments {
			out[i] += n.quantity(s.instruments[i].rules.Measures) / float64(s.samples)
		}
	}
	return out
}

// sampleTime is the middle of one of the parts of a record.
func (s *Station) sampleTime(start minute.Stamp, k int) minute.Stamp {
	return start + s.interval*minute.Stamp(2*k+1)/minute.Stamp(2*s.samples)
}

// quantity is the true value of a quantity, in its own unit.
func (n *now) quantity(q rules.Quantity) float64 {
	switch q {
	case rules.Global:
		return n.global
	case rules.Direct:
		return n.direct
	case rules.Diffuse:
		return n.diffuse
	case rules.Reflected:
		return n.reflected
	case rules.LWDown:
		return n.lwDown
	case rules.LWUp:
		return n.lwUp
	case rules.UV:
		return uvShare(n) * n.global
	case rules.PAR:
		return parPerWatt * n.global
	case rules.AirTemperature:
		return n.airC
	case rules.Humidity:
		return n.humidityPct
	case rules.Pressure:
		return n.pressureHPa
	case rules.WindSpeed:
		return n.windMs
	}
	return math.NaN()
}

// parPerWatt is the photons of 400 to 700 nm in a watt of global, umol/J: common practice.
const parPerWatt = 2.05

// uvShare is the ultraviolet part of global: less of it under a low sun, more under cloud, which dims the rest (common practice).
func uvShare(n *now) float64 { return float64(0.028*(1+n.mu)) * (1 + float64(0.25*n.cover)) }
