package fault

import (
	"math"

	"fluxwarden/rules"
)

// A dip is a short loss of the beam while global and diffuse say that the sun is out, by the sun's bearing.
type dip struct {
	From Number `json:"from"` // bearing, degrees
	To   Number `json:"to"`
	Day  int64  `json:"day"`
	At   int64  `json:"at"` // first minute
}

const (
	dipsMost         = 40
	dipDays          = 12
	dipLongest       = 30 // minutes: beyond it is no mast or pole
	dipShortest      = 3
	shadowEdgeDeg    = 0.7 // by which two bearings of one obstacle may differ, and the sun's own width
	shadowClearMost  = 4   // minutes of full beam at its bearing that end it
	shadowShareBelow = 0.35
)

// watchShadow notes dips of the beam, and raises shadow once the same bearing has lost it on different days: a cloud does not come back
// to a bearing, a mast does not leave it.
func (w *Watcher) watchShadow(v *view) {
	s := &w.slow
	g, b, d := v.g(), v.b(), v.d()
	want := v.expected[rules.Direct]
	usable := v.sunUp && !math.IsNaN(g+b+d) && !w.tainted(rules.Global) && !w.tainted(rules.Diffuse)
	dark := usable && want > 200 && want*v.mu > 60 && b < shadowShareBelow*want && want > 0.5*v.clear[rules.Direct]
	if dark {
		if s.Dip.At == 0 {
			s.Dip = dip{From: Number(v.azimuthDeg), Day: w.day, At: v.minute}
		}
		s.Dip.To = Number(v.azimuthDeg)
		w.shadowAgain(v)
		return
	}
	if s.Dip.At != 0 && (v.minute-s.Dip.At > 1 || usable) {
		length := v.minute - s.Dip.At
		if length >= dipShortest && length <= dipLongest {
			w.keepDip(s.Dip)
		}
		s.Dip = dip{}
	}
	w.shadowGone(v, usable && want > 200 && b > 0.75*want)
}

func (w *Watcher) keepDip(d dip) {
	s := &w.slow
	kept := s.Dips[:0]
	for _, o := range s.Dips {
		if w.day-o.Day <= dipDays {
			kept = append(kept, o)
		}
	}
	s.Dips = append(kept, d)
	if len(s.Dips) > dipsMost {
		s.Dips = append(s.Dips[:0], s.Dips[1:]...)
	}
}

// shadowAgain raises the fault when the dip under way stands at the bearing of one of an earlier day, long enough to be sure.
func (w *Watcher) shadowAgain(v *view) {
	s := &w.slow
	p := w.setup.Instruments[rules.Direct].ID
	if w.openIndex(p, rules.Shadow) >= 0 || v.minute-s.Dip.At < dipShortest || v.minute-s.Dip.At > dipLongest {
		return
	}
	from, to := s.Dip.From.Float(), s.Dip.To.Float()
	dir := 1.0 // south of the sun's path its bearing falls
	if turn(from, to) < 0 {
		dir = -1
	}
	first, lo, hi, n := int64(0), 0.0, dir*turn(from, to), 0
	last := w.day
	for i := len(s.Dips) - 1; i >= 0; i-- {
		o := &s.Dips[i]
		begin, end := dir*turn(from, o.From.Float()), dir*turn(from, o.To.Float())
		if o.Day == last || math.Abs(begin) > shadowEdgeDeg || end < float64(dir*turn(from, to))-shadowEdgeDeg {
			continue
		}
		last, first, n = o.Day, o.At, n+1
		lo, hi = min(lo, begin), max(hi, end)
	}
	if n == 0 {
		return
	}
	lo, hi = math.Mod(from+float64(dir*(lo-0.5))+360, 360), math.Mod(from+float64(dir*(hi+0.5))+360, 360)
	if dir < 0 {
		lo, hi = hi, lo
	}
	w.raise(Episode{Instrument: p, Kind: rules.Shadow, Severity: rules.Act, From: w.hindsight(first), Raised: v.minute,
		Confidence: confidence(2 + float64(2*n)), Evidence: []Evidence{{"bearing_from", roundTo(lo, 10), "degrees"},
			{"bearing_to", roundTo(hi, 10), "degrees"}, {"days", float64(n + 1), "1"}}})
}

// shadowGone ends it after some minutes of full beam in the middle of its bearing.
func (w *Watcher) shadowGone(v *view, full bool) {
	i := w.openIndex(w.setup.Instruments[rules.Direct].ID, rules.Shadow)
	if i < 0 {
		w.slow.FullBeam = 0
		return
	}
	from, _ := w.open[i].number("bearing_from")
	to, _ := w.open[i].number("bearing_to")
	width := math.Mod(to-from+360, 360)
	if inset := min(1.2, width/4); !full || !withinArc(v.azimuthDeg, from+inset, to-inset) {
		return
	}
	w.slow.FullBeam++
	if w.slow.FullBeam >= shadowClearMost {
		w.finish(i, v.minute)
		w.slow.FullBeam = 0
	}
}

// turn is by how much a bearing turns clockwise from a to b, -180..180 degrees.
func turn(a, b float64) float64 { return math.Mod(b-a+900, 360) - 180 }

// withinArc says whether a bearing lies on the arc clockwise from one bearing to another.
func withinArc(azimuth, from, to float64) bool {
	return math.Mod(azimuth-from+720, 360) <= math.Mod(to-from+720, 360)
}
