package fault

import (
	"math"

	"fluxwarden/rules"
)

// becomeZeroOffset turns the open imbalance into a zero offset, which the night has now shown: by day an offset upsets how the three
// close as a gain or a tilt does.
func (w *Watcher) becomeZeroOffset(c *faultCase, s *suspicion) {
	e := &w.open[w.imbalanceEpisode()]
	id := c.of(w.setup)
	if e.Instrument != id || e.Severity != rules.Act {
		e.Raised = w.now.minute
	}
	e.Instrument, e.Kind, e.Also, e.Severity, e.Advice = id, c.kind, nil, rules.Act, c.kind.Entry().Advice
	e.Evidence = w.evidenceOf(c, s)
	e.Confidence = confidence(s.Score)
	e.Rev++
	w.slow.Episode, w.slow.Imbalance = "", imbalance{}
}

// zeroOffset: at night a shortwave instrument stands steadily off where it has stood in the nights before. A sky that clears or clouds
// over moves the zero of a sound one by a few watts (ISO 9060:2018: 7 W/m2 at 200 W/m2 of net longwave for class A, from
// memory; ventilated ones less), so it takes an hour or more.
func zeroOffset(w *Watcher, c *faultCase, v *view) hint {
	x := v.value[c.quantity]
	if !v.night || math.IsNaN(x) || math.Abs(x) > 60 {
		return nothing
	}
	room := 12.0
	if w.base.zeroKnown[c.quantity] {
		x -= w.base.zero[c.quantity]
		room = 5
	}
	if w.ventilationDoubted(c.quantity) {
		room = 12 // by less the still air about the dome takes it down
	}
	switch off := math.Abs(x); {
	case off > room:
		return hint{min(0.15, 0.0125*(off-room+1)), x}
	case off < 0.6*room:
		return hint{odds: -0.15}
	}
	return nothing
}
