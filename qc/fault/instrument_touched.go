package fault

import (
	"math"

	"fluxwarden/rules"
)

// Hands on a dome keep the light off by fits and starts for some minutes while the other instruments go on as before, and then all is as it
// was. A cloud takes all of them; a mast takes one, but once and in one piece; what lasts is another kind.
const (
	touchLeast   = 2    // minutes
	touchLongest = 15   // minutes
	touchCalm    = 8    // steady minutes that must come before
	touchOver    = 3    // steady minutes after it
	touchedShare = 0.12 // by which a touched instrument stands off what it was
	steadyShare  = 0.04 // by which the others may
	touchLight   = 100  // W/m2 of global before it
	touchTurns   = 2    // ups and downs that a lone pyrheliometer must show: one plateau is a shadow
)

// A touch is a spell of hands on the instruments as far as it has gone. It is not carried over midnight.
type touch struct {
	calm    int        // steady minutes on end
	before  [3]float64 // what the three said in the last of them, W/m2
	clear   float64    // the clear sky's global then, W/m2
	at      int64      // the first touched minute; 0 while all is steady
	touched [3]int     // minutes in which each was
	most    [3]float64 // the greatest share by which each was off
	turns   int        // times that it changed its course
	last    [3]float64
	over    int // steady minutes since
}

// watchTouch takes a minute into the spell.
func (w *Watcher) watchTouch(v *view) {
	t := &w.touch
	g, b, d := v.g(), v.b(), v.d()
	if !v.sunUp || math.IsNaN(g+b+d) || v.minute != w.prev(0).minute+1 {
		*t = touch{}
		return
	}
	if t.at == 0 && (math.Abs(g-v.sum) < float64(0.04*v.sum)+6) && v.steady {
		t.calm++
		t.before, t.clear = [3]float64{g, b, d}, v.clear[rules.Global]
		return
	}
	if t.calm < touchCalm || !(t.clear > 0) || t.before[0] < touchLight {
		*t = touch{}
		return
	}
	off, k := t.offBy(v)
	switch {
	case k == somethingElse:
		*t = touch{}
	case k == allSteady:
		if t.at == 0 {
			t.calm = 0
			return
		}
		if t.over++; t.over >= touchOver {
			w.raiseTouch(v)
			*t = touch{}
		}
	default:
		t.take(v, off, k)
		if v.minute-t.at >= touchLongest {
			*t = touch{}
		}
	}
}

const (
	allSteady     = -1
	somethingElse = -2
)

// offBy gives by what share one of the three stands off what it was before, and which: the other two must stand as before, as the sun
// has gone on.
func (t *touch) offBy(v *view) (share float64, k int) {
	gone := v.clear[rules.Global] / t.clear
	k = allSteady
	for i, q := range threeShortwave {
		want := t.before[i]
		if q != rules.Direct {
			want *= gone
		}
		if want < 30 { // too little to tell
			if math.Abs(v.value[q]-want) > 15 {
				return 0, somethingElse
			}
			continue
		}
		off := v.value[q]/want - 1
		switch {
		case math.Abs(off) < steadyShare:
		case k >= 0 || t.at == 0 && math.Abs(off) < touchedShare: // in the middle of it a hand may hardly shade
			return 0, somethingElse
		default:
			share, k = off, i
		}
	}
	return share, k
}

func (t *touch) take(v *view, off float64, k int) {
	if t.at == 0 {
		t.at = v.minute
	}
	t.over = 0
	if t.touched[k] > 0 && math.Abs(off-t.last[k]) > touchedShare/2 {
		t.turns++
	}
	t.last[k] = off
	t.touched[k]++
	if math.Abs(off) > math.Abs(t.most[k]) {
		t.most[k] = off
	}
}

// raiseTouch tells a spell that is over. It names the instrument that was touched longest.
func (w *Watcher) raiseTouch(v *view) {
	t := &w.touch
	end := v.minute - touchOver + 1
	length := end - t.at
	first, several := 0, 0
	for i := range t.touched {
		if t.touched[i] > t.touched[first] {
			first = i
		}
		if t.touched[i] > 0 {
			several++
		}
	}
	if length < touchLeast || length > touchLongest || t.turns < touchTurns && several < 2 {
		return
	}
	e := w.raise(Episode{Instrument: w.setup.Instruments[threeShortwave[first]].ID, Kind: rules.InstrumentTouched, Also: []rules.FaultKind{rules.DomeFouled},
		Severity: rules.Watch, From: t.at, Raised: v.minute, Confidence: confidence(1.5 + float64(several)),
		Evidence: []Evidence{{"minutes", float64(length), "min"}, {"most_off", roundTo(100*t.most[first], 1), "%"}, {"instruments", float64(several), "1"}}})
	if e == nil {
		return
	}
	w.finish(len(w.open)-1, end)
	for i := range w.cases { // what seemed to be noise was the hand
		if s := &w.cases[i]; catalogueOfCases[i].kind == rules.Noise && s.Since >= t.at-2 {
			*s = suspicion{Since: noMinute}
		}
	}
}
