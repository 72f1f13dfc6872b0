package fault

import (
	"math"

	"fluxwarden/rules"
)

// Concerns says whether an episode is about a quantity's instrument: its own, or one that the tracker or the logger upsets.
func Concerns(e *Episode, s *Setup, instrument string, q rules.Quantity) bool {
	switch e.Instrument {
	case Tracker:
		return q == rules.Direct || q == rules.Diffuse
	case Logger:
		return int(q) < rules.RadiationCount
	}
	if e.Kind == rules.ChannelsSwapped && (q == rules.Global || q == rules.Diffuse) {
		return instrument == s.Instruments[q].ID
	}
	if e.snowOnBoth(s, q) {
		return instrument == s.Instruments[q].ID
	}
	return e.Instrument == instrument
}

// snowOnBoth says whether an episode of snow on the dome of global concerns diffuse too: it falls on both domes, and lies longer in the shade.
func (e *Episode) snowOnBoth(s *Setup, q rules.Quantity) bool {
	return e.Kind == rules.DomeSnow && q == rules.Diffuse && e.Instrument == s.Instruments[rules.Global].ID
}

// Reaches says whether the episode spoils one minute of one quantity: a clip its rail, gain, tilt, pointing and shade the
// sunlit minutes, a shadow its bearing.
func Reaches(e *Episode, q rules.Quantity, measured, apparentZenithDeg, azimuthDeg float64) bool {
	const sunlit = 91
	switch e.Kind {
	case rules.RangeClipped:
		rail, ok := e.number("rail")
		return ok && measured > rail-1
	case rules.PointingLost, rules.ShadeOff, rules.SensorTilted, rules.SensitivityWrong, rules.SensitivityDrift, rules.DomeSoiled,
		rules.UnitSlip, rules.ChannelsSwapped, rules.PolarityReversed:
		return apparentZenithDeg < sunlit || q.Longwave()
	case rules.DomeWet, rules.DomeSnow:
		return apparentZenithDeg < sunlit || q.Longwave()
	case rules.ClockShift: // at night there is nothing to be early or late with, but in the longwave
		return apparentZenithDeg < 97 || q.Longwave()
	case rules.DomeFouled: // a spot reaches its bearings
		from, ok1 := e.number("bearing_from")
		to, ok2 := e.number("bearing_to")
		return apparentZenithDeg < sunlit && (!ok1 || !ok2 || withinArc(azimuthDeg, from, to)) || q.Longwave()
	case rules.Shadow:
		from, ok1 := e.number("bearing_from")
		to, ok2 := e.number("bearing_to")
		return ok1 && ok2 && withinArc(azimuthDeg, from, to) && apparentZenithDeg < sunlit
	}
	return true
}

func (e *Episode) number(name string) (float64, bool) {
	for i := range e.Evidence {
		if e.Evidence[i].Name == name {
			return e.Evidence[i].Value, true
		}
	}
	return math.NaN(), false
}

// Restore gives the value that a restorable fault has hidden, from what was measured; ok is false where it cannot be had.
func Restore(e *Episode, q rules.Quantity, s *Setup, measured func(rules.Quantity) float64) (float64, bool) {
	v := math.NaN()
	switch e.Kind {
	case rules.PolarityReversed:
		v = -measured(q)
	case rules.ChannelsSwapped:
		toG, toD := s.swapFactors()
		if q == rules.Global {
			v = measured(rules.Diffuse) * toG
		} else {
			v = measured(rules.Global) * toD
		}
	case rules.ZeroOffset:
		if off, ok := e.number("offset"); ok {
			v = measured(q) - off
		}
	}
	return v, !math.IsNaN(v)
}

// explains says whether the open episode accounts for what the new one would say. One cause that upsets global, direct or diffuse
// upsets how the three close, so while it is open nothing that rests on their closing is raised.
func explains(open, e *Episode) bool {
	if open.Severity != rules.Act || accountsForNothing.Has(open.Kind) || e.Kind == rules.DataGap {
		return false
	}
	if open.Instrument == e.Instrument {
		return open.Kind != e.Kind
	}
	return restsOnClosing.Has(e.Kind) && upsetsClosing.Has(open.Kind) && open.Kind != rules.ThermistorBad
}

const (
	// accountsForNothing are the kinds that leave an instrument nearly as it was: beside them it can have any other.
	accountsForNothing = rules.FaultSet(1<<rules.DataGap | 1<<rules.SensitivityDrift | 1<<rules.VentilationLost | 1<<rules.InstrumentTouched)

	restsOnClosing = rules.FaultSet(1<<rules.SignalLost | 1<<rules.UnitSlip | 1<<rules.PolarityReversed | 1<<rules.ChannelsSwapped |
		1<<rules.ShadeOff | 1<<rules.PointingLost | 1<<rules.SensitivityWrong | 1<<rules.SensitivityDrift | 1<<rules.SensorTilted |
		1<<rules.DomeWet | 1<<rules.DomeSnow | 1<<rules.DomeSoiled | 1<<rules.RangeClipped | 1<<rules.Shadow | 1<<rules.Noise)
	upsetsClosing = restsOnClosing&^accountsForNothing | rules.FaultSet(1<<rules.SignalFrozen|1<<rules.ClockShift|1<<rules.ZeroOffset)
)
