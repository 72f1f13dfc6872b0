package synth

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// effects are what the faults of a moment do to one instrument.
type effects struct {
	beamPass, skyPass float64 // what the dome lets through
	beamIn            float64 // share of the beam on a shaded instrument
	pointing          float64 // share of the beam within a pyrheliometer's view
	tiltDeg           float64
	towardsDeg        float64
	netPass           float64 // of the net longwave, to a pyrgeometer's thermopile
	cooling           float64 // times the usual zero offset
	gain              float64
	addWm2, noiseWm2  float64
	clipWm2           float64
	factor            float64 // at the input: a sign, a unit
	open              float64 // W/m2 by which an open input floats; 0 is connected
	lost              bool
	bodyAddK          float64
}

func soundEffects() effects {
	return effects{beamPass: 1, skyPass: 1, pointing: 1, netPass: 1, cooling: 1, gain: 1, clipWm2: math.Inf(1), factor: 1}
}

// faultAt gives the first fault of a kind that holds for the record that begins at a time.
func (s *Station) faultAt(start minute.Stamp, kind rules.FaultKind) *activeFault {
	for i := range s.faults {
		if f := &s.faults[i]; f.Kind == kind && f.holds(start) {
			return f
		}
	}
	return nil
}

func (f *activeFault) holds(start minute.Stamp) bool { return start >= f.From && start < f.To }

// passed is how much of the fault's time has gone, 0..1.
func (f *activeFault) passed(start minute.Stamp) float64 {
	return float64(start-f.From) / float64(f.To-f.From)
}

// effectsOn gathers what the faults do to instrument i during the record that begins at a time.
func (s *Station) effectsOn(i int, n *now, start minute.Stamp, faulty bool) effects {
	e := soundEffects()
	if !faulty {
		return e
	}
	for k := range s.faults {
		f := &s.faults[k]
		if !f.holds(start) {
			continue
		}
		switch {
		case f.Kind == rules.PointingLost:
			f.pointing(&e, n)
		case f.instrument == i:
			f.onDome(&e, n, start)
			f.onDetector(&e, start)
			f.onInput(&e)
		}
	}
	return e
}

// A pyrheliometer sees the whole sun up to its slope angle of 1 degree and none of it beyond the limit angle of 4 (WMO-No. 8,
// chapter 7: half-opening 2.5, slope 1 degrees); a shade on the same tracker covers what the pyrheliometer sees.
const (
	slopeAngleDeg = 1
	limitAngleDeg = 4
)

func (f *activeFault) pointing(e *effects, n *now) {
	// An azimuth axis that is off by an angle turns the sight line by that angle about the vertical: little under a high sun, most at the horizon.
	half := exact.Sin(f.Amount / 2 * radPerDeg)
	off := 2 * exact.Asin(clamp(math.Abs(half)*math.Sqrt(math.Max(0, 1-float64(n.up*n.up))), 0, 1)) / radPerDeg
	if f.Amount == 0 {
		at := &f.stopped
		cos := float64(n.east*at.east) + float64(n.north*at.north) + float64(n.up*at.up)
		off = exact.Acos(clamp(cos, -1, 1)) / radPerDeg
	}
	hit := 1 - ramp(off, slopeAngleDeg, limitAngleDeg)
	e.pointing *= hit
	e.beamIn = math.Max(e.beamIn, 1-hit)
}

// A spot of 8 mm radius on a dome of 25 mm, over a detector of 10 mm, takes its share of the beam while the sun stands within 5 degrees of it and
// none beyond 41 (the sizes are common practice, the angles their geometry), and a tenth of that of the sky. On a window it takes its share of all.
const (
	spotWholeDeg = 5
	spotNoneDeg  = 41
	spotOfSky    = 0.1
)

func (f *activeFault) spot(e *effects, n *now) {
	if f.onWindow {
		e.beamPass *= 1 - f.Amount
		return
	}
	at := &f.stopped
	cos := float64(n.east*at.east) + float64(n.north*at.north) + float64(n.up*at.up)
	away := exact.Acos(clamp(cos, -1, 1)) / radPerDeg
	e.beamPass *= 1 - float64(f.Amount*(1-ramp(away, spotWholeDeg, spotNoneDeg)))
	e.skyPass *= 1 - float64(spotOfSky*f.Amount)
	e.netPass *= 1 - float64(spotOfSky*f.Amount)
}

// onDome is what lies on the dome, shades it or moves it.
func (f *activeFault) onDome(e *effects, n *now, start minute.Stamp) {
	keepOff := func(share float64) {
		share = float64(share)
		e.beamPass *= 1 - share
		e.skyPass *= 1 - share
		e.netPass *= 1 - share
	}
	seconds := float64(start) / minute.MicrosPerSecond
	switch f.Kind {
	case rules.ShadeOff:
		e.beamIn = f.Amount
	case rules.DomeWet: // drops wander and dry away
		left := math.Sqrt(1 - f.passed(start))
		scattered := float64(f.Amount * left * (1 + float64(0.4*f.chance.smooth(seconds, 240))))
		e.beamPass *= 1 - scattered
		e.skyPass *= 1 - float64(0.15*scattered)
		e.netPass *= 1 - float64(0.93*left)
	case rules.DomeSnow: // settles within half an hour
		keepOff(float64(f.Amount * ramp(float64(start-f.From)/minute.MicrosPerMinute, -1, 30) * (1 + float64(0.08*f.chance.smooth(seconds, 900)))))
	case rules.DomeSoiled:
		keepOff(f.Amount * f.passed(start))
	case rules.DomeFouled:
		f.spot(e, n)
	case rules.SensorTilted:
		e.tiltDeg, e.towardsDeg = f.Amount, f.TowardsDeg
	case rules.Shadow:
		if away := math.Abs(math.Mod(azimuth(n)-f.TowardsDeg+540, 360) - 180); away <= f.Amount {
			e.beamPass = 0.02 * e.beamPass
			e.skyPass *= 0.96
		}
	case rules.InstrumentTouched:
		keepOff(f.Amount * f.chance.uniform(int64(seconds/10)))
	}
}

// onDetector is what has become of the detector and its surroundings.
func (f *activeFault) onDetector(e *effects, start minute.Stamp) {
	switch f.Kind {
	case rules.SensitivityWrong:
		e.gain *= 1 + f.Amount
	case rules.SensitivityDrift:
		e.gain *= 1 + float64(f.Amount*f.passed(start))
	case rules.ZeroOffset:
		e.addWm2 += f.Amount
	case rules.VentilationLost:
		e.cooling *= f.Amount
		e.addWm2 -= f.Amount
	case rules.Noise:
		e.noiseWm2 = f.Amount
	case rules.ThermistorBad:
		e.bodyAddK += f.Amount
	}
}

// onInput is what cables and the logger do.
func (f *activeFault) onInput(e *effects) {
	switch f.Kind {
	case rules.SignalLost:
		e.open, e.lost = f.Amount, f.Amount == 0
	case rules.RangeClipped:
		e.clipWm2 = f.Amount
	case rules.PolarityReversed:
		e.factor = -e.factor
	case rules.UnitSlip:
		e.factor *= f.Amount
	}
}

// freeze puts the held values in for inputs that stand still.
func (s *Station) freeze(all []sensed, start minute.Stamp) {
	for i := range s.faults {
		if f := &s.faults[i]; f.held != nil && f.holds(start) {
			held := *f.held
			held.sd, held.least, held.most = 0, held.mean, held.mean
			all[f.instrument] = held
		}
	}
}

// swap exchanges the voltages of two inputs; body temperatures stay where they are.
func (s *Station) swap(all []sensed, start minute.Stamp) {
	for i := range s.faults {
		if f := &s.faults[i]; f.partner >= 0 && f.holds(start) {
			a, b := &all[f.instrument], &all[f.partner]
			*a, *b = sensed{b.mean, b.sd, b.least, b.most, a.bodyC, a.domeC}, sensed{a.mean, a.sd, a.least, a.most, b.bodyC, b.domeC}
		}
	}
}

// azimuth is the sun's, degrees from north, clockwise.
func azimuth(n *now) float64 {
	a := exact.Atan2(n.east, n.north) / radPerDeg
	if a < 0 {
		a += 360
	}
	return a
}

func (s *Station) azimuthAt(at minute.Stamp) float64 {
	n := s.skyAt(at)
	return azimuth(&n)
}
