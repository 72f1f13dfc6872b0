package fault

import (
	"math"

	"fluxwarden/rules"
)

// A spot on a dome takes a share of the beam while the sun stands behind it, for as long as the spot is wide as the detector sees it: a dome of
// 25 mm radius over a detector of 10 mm makes hours of it, with slow edges. On other bearings, and under cloud, hardly anything is amiss. So it
// begins as a loss of gain and shows what it is when the sun has gone on. A repair ends a loss within a minute; a spot lets it fade.
const (
	arcBins       = 48   // bearings of 7.5 degrees
	arcMinutes    = 8    // that a bearing must rest on
	arcWidest     = 14   // bearings that one spot can reach: 105 degrees
	fouledDeepest = 0.06 // of the light that it must take where it takes most
	fouledGood    = 20   // minutes in the middle of its bearings, without a loss, that end it
	fouledMorning = 240  // minutes after sunrise in which a humid night may have left dew
	fouledDays    = 5    // without sun behind it, after which it is let go
)

// An arc is the deviation of global by the sun's bearing.
type arc [arcBins]mean

func (a *arc) add(azimuthDeg, delta float64) {
	a[arcOf(azimuthDeg)].add(delta)
}

func arcOf(azimuthDeg float64) int { return int(azimuthDeg*(arcBins/360.0)) % arcBins }

// A spot is something on the dome of the global instrument.
type spot struct {
	Episode  string `json:"episode"`
	From, To Number // bearings
	Depth    Number `json:"depth"` // share of the light, negative
	Good     int    `json:"good"`
	Last     int64  `json:"last"` // the last minute that bore it out
}

// spotOf finds one spot in the deviations: bearings in a row that all lose light, no more than one spot can reach, whose far edge fades; dir is
// 1 where the sun's bearing rises and -1 where it falls.
func (a *arc) spotOf(now, dir int) (from, to int, depth float64, ok bool) {
	at := func(i int) float64 {
		m := &a[(i+2*arcBins)%arcBins]
		if m.N < arcMinutes {
			return math.NaN()
		}
		return m.of()
	}
	deepest := 0
	for i := range a {
		if v := at(i); v < depth {
			deepest, depth = i, v
		}
	}
	if !(depth < -fouledDeepest) {
		return 0, 0, 0, false
	}
	lost := func(i int) bool { return at(i) < 0.25*depth }
	first, last := deepest, deepest
	for lost(first-dir) && (last-first)*dir < arcBins {
		first -= dir
	}
	for lost(last+dir) && (last-first)*dir < arcBins {
		last += dir
	}
	fading := 0
	for i := deepest + dir; i != last+2*dir; i += dir {
		if v := at(i); v < 0.15*depth && v > 0.85*depth {
			fading++
		}
	}
	for i := range a { // nowhere else anything is amiss
		inside := ((i-first)*dir+2*arcBins)%arcBins <= (last-first)*dir
		if v := at(i); !inside && math.Abs(v) > 0.4*-depth {
			return 0, 0, 0, false
		}
	}
	wide := (last-first)*dir + 1
	gone := ((now-last)*dir + 2*arcBins) % arcBins
	if wide > arcWidest || wide < 3 || fading < 2 || gone == 0 || gone > arcBins/2 {
		return 0, 0, 0, false
	}
	if dir < 0 {
		first, last = last, first
	}
	return (first + 2*arcBins) % arcBins, (last + 2*arcBins) % arcBins, depth, true
}

// becomesFouled turns a loss of gain of global that is over into something on its dome, if it went as a spot goes.
func (w *Watcher) becomesFouled(open int, v *view) bool {
	e := &w.open[open]
	im := &w.slow.Imbalance
	named := rules.FaultSet(1<<rules.SensitivityWrong | 1<<rules.DomeSoiled | 1<<rules.SensorTilted | 1<<rules.DomeSnow)
	if e.Instrument != w.setup.Instruments[rules.Global].ID || !named.Has(e.Kind) {
		return false
	}
	if im.Since-im.Rise < fouledMorning && im.DewGap <= dewGapMost {
		return false // dew that dries fades as a spot does
	}
	dir := 1
	if turn(w.prev(0).azimuthDeg, v.azimuthDeg) < 0 {
		dir = -1
	}
	from, to, depth, ok := im.Arc.spotOf(arcOf(v.azimuthDeg), dir)
	if !ok || im.Dull.N >= 20 && im.Dull.of() < 0.6*depth {
		return false
	}
	const width = 360.0 / arcBins
	e.Also = []rules.FaultKind{e.Kind}
	e.Kind, e.Advice = rules.DomeFouled, rules.DomeFouled.Entry().Advice
	s := spot{Episode: e.ID, From: Number(width * float64(from)), To: Number(width * float64(to+1)), Depth: quantise(depth), Last: v.minute}
	e.Evidence = []Evidence{{"gain", roundTo(1+depth, 1000), "1"}, {"bearing_from", s.From.Float(), "degrees"}, {"bearing_to", math.Mod(s.To.Float(), 360), "degrees"},
		{"minutes", float64(im.N), "min"}}
	e.Rev++
	w.kinds.Spot = s
	w.slow.Episode, *im = "", imbalance{}
	return true
}

// watchFouled ends a spot once the sun stands behind where it was and nothing is lost. It says whether the minute is the spot's, so that nothing
// else is made of it.
func (w *Watcher) watchFouled(v *view) bool {
	s := &w.kinds.Spot
	if s.Episode == "" {
		return false
	}
	open := w.openByID(s.Episode)
	if open < 0 {
		*s = spot{}
		return false
	}
	if v.minute-s.Last > fouledDays*1440 {
		w.finish(open, s.Last+1)
		*s = spot{}
		return false
	}
	width := math.Mod(s.To.Float()-s.From.Float()+360, 360)
	const edge = 7.5
	if !v.sunUp || !withinArc(v.azimuthDeg, s.From.Float()-edge, s.To.Float()+edge) {
		return false
	}
	if inner := width / 3; withinArc(v.azimuthDeg, s.From.Float()+inner, s.To.Float()-inner) && float64(v.b()*v.mu) > 80 {
		switch delta := v.g()/v.sum - 1; {
		case delta > 0.3*s.Depth.Float() && delta < -0.3*s.Depth.Float():
			s.Good++
		case delta < 0.5*s.Depth.Float():
			s.Good, s.Last = 0, v.minute
		}
		if s.Good >= fouledGood {
			w.finish(open, v.minute-fouledGood+1)
			*s = spot{}
			return false
		}
	}
	return true
}
