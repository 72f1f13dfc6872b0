package fault

import (
	"math"
	"slices"

	"fluxwarden/rules"
)

// After a fault is over, by a note of work or by itself, its residual is held against what it was while the fault lasted. Thirty minutes that
// can show it are enough to say whether the repair worked.

// A CheckOutcome is what became of a repair. The list is closed and only grows at its end.
type CheckOutcome uint8

const (
	CheckNotSeen CheckOutcome = iota // too few minutes that can show it so far
	CheckWorked
	CheckDidNot
)

var checkWords = [...]string{"not seen yet", "worked", "did not"}

func (o CheckOutcome) String() string { return checkWords[o] }

// A Check is the question whether the end of a fault was its end.
type Check struct {
	Episode    string          `json:"episode"`
	Instrument string          `json:"instrument"`
	Kind       rules.FaultKind `json:"kind"`
	At         int64           `json:"at"`             // the first minute that should be sound
	Note       string          `json:"note,omitempty"` // of the work that ended it; empty where it ended by itself
	Unit       string          `json:"unit"`           // of Before and After
	Before     Number          `json:"before"`         // its residual while it lasted
	After      Number          `json:"after"`          // its residual since
	N          int             `json:"n"`              // minutes that could show it since
	Outcome    CheckOutcome    `json:"outcome"`
	Done       int64           `json:"done,omitempty"` // the minute at which the outcome was known
}

// A during is the residual of an open episode, as a running mean.
type during struct {
	Episode string `json:"episode"`
	Mean    Number `json:"mean"`
	N       int    `json:"n"`
}

const (
	checkMinutes  = 30
	checksMost    = 12
	checkKeptDays = 3
	duringMinutes = 60   // over which the running mean runs
	checkShare    = 0.4  // of the residual before, that may be left
	checkClosure  = 0.03 // that a sound station may have anyway
	checkBeam     = 0.15
	checkTimes    = 0.1
	checkWm2      = 5.0
	checkK        = 3.0
)

// watchRepairs takes a minute into the residuals of what is open and what is over. It costs nothing while all is well.
func (w *Watcher) watchRepairs(v *view) {
	if len(w.open) == 0 && len(w.kinds.Checks) == 0 {
		return
	}
	for i := range w.open {
		e := &w.open[i]
		if e.Severity != rules.Act {
			continue
		}
		if r, _, _, ok := w.residual(e.Kind, e.Instrument, v); ok {
			d := w.duringOf(e.ID)
			d.N = min(d.N+1, duringMinutes)
			d.Mean += Number((r - d.Mean.Float()) / float64(d.N))
		}
	}
	for i := range w.kinds.Checks {
		c := &w.kinds.Checks[i]
		if c.Outcome != CheckNotSeen || v.minute < c.At {
			continue
		}
		r, _, _, ok := w.residual(c.Kind, c.Instrument, v)
		if !ok {
			continue
		}
		c.N++
		c.After += Number((r - c.After.Float()) / float64(c.N))
		if c.N >= checkMinutes {
			c.judge()
			w.tellCheck(c)
		}
	}
}

func (w *Watcher) duringOf(id string) *during {
	for i := range w.kinds.During {
		if w.kinds.During[i].Episode == id {
			return &w.kinds.During[i]
		}
	}
	w.kinds.During = append(w.kinds.During, during{Episode: id})
	return &w.kinds.During[len(w.kinds.During)-1]
}

// tellCheck writes the outcome beside the evidence of an episode that ended today; of one that ended earlier the check itself is all there is.
func (w *Watcher) tellCheck(c *Check) {
	c.Done = w.now.minute
	for i := range w.closed {
		if e := &w.closed[i]; e.ID == c.Episode {
			e.Evidence = append(slices.Clone(e.Evidence), Evidence{"before_its_end", roundTo(c.Before.Float(), 1000), c.Unit},
				Evidence{"after_its_end", roundTo(c.After.Float(), 1000), c.Unit})
			e.Rev++
		}
	}
}

// Check is the repair as the episode's own evidence tells it; nil where it does not.
func (e *Episode) Check() *Check {
	before, ok1 := e.number("before_its_end")
	after, ok2 := e.number("after_its_end")
	if !ok1 || !ok2 {
		return nil
	}
	c := &Check{Episode: e.ID, Instrument: e.Instrument, Kind: e.Kind, At: e.To, Before: Number(before), After: Number(after), N: checkMinutes}
	for i := range e.Evidence {
		if e.Evidence[i].Name == "after_its_end" {
			c.Unit = e.Evidence[i].Unit
		}
	}
	c.judge()
	return c
}

// judge says, once there are enough minutes, whether the repair worked.
func (c *Check) judge() {
	least := map[string]float64{"1": checkClosure, "W/m2": checkWm2, "K": checkK}[c.Unit]
	switch c.Kind {
	case rules.PointingLost:
		least = checkBeam
	case rules.SignalLost, rules.SignalFrozen:
		least = checkTimes
	}
	c.Outcome = CheckDidNot
	if c.After.Float() <= max(least, checkShare*c.Before.Float()) {
		c.Outcome = CheckWorked
	}
}

// beginCheck asks, from the end of an episode on, whether it is over.
func (w *Watcher) beginCheck(e *Episode) {
	var d during
	for i := range w.kinds.During {
		if w.kinds.During[i].Episode == e.ID {
			d = w.kinds.During[i]
			w.kinds.During = slices.Delete(w.kinds.During, i, i+1)
			break
		}
	}
	if e.Severity != rules.Act || d.N == 0 {
		return
	}
	_, unit, least, _ := w.residual(e.Kind, e.Instrument, w.now)
	if !(d.Mean.Float() > least/2) {
		return // it had faded already: there is nothing to hold against
	}
	if len(w.kinds.Checks) >= checksMost {
		w.kinds.Checks = slices.Delete(w.kinds.Checks, 0, 1)
	}
	w.kinds.Checks = append(w.kinds.Checks, Check{Episode: e.ID, Instrument: e.Instrument, Kind: e.Kind, At: e.To, Unit: unit, Before: quantise(d.Mean.Float())})
}

// noteCheck says of the check that was begun last which note asked for it.
func (w *Watcher) noteCheck(note string) {
	if k := len(w.kinds.Checks) - 1; k >= 0 && len(w.closed) > 0 && w.kinds.Checks[k].Episode == w.closed[len(w.closed)-1].ID {
		w.kinds.Checks[k].Note = note
	}
}

// againAfterCheck says of the checks on an instrument that the same fault has been raised again, or that its end was none.
func (w *Watcher) againAfterCheck(e *Episode) {
	for i := range w.kinds.Checks {
		if c := &w.kinds.Checks[i]; c.Instrument == e.Instrument && c.Kind == e.Kind && c.Outcome == CheckNotSeen && e.Severity == rules.Act {
			c.Outcome, c.Done = CheckDidNot, w.now.minute
		}
	}
}

// forgetChecks drops, at the end of a day, what has been known for some days.
func (w *Watcher) forgetChecks() {
	w.kinds.Checks = slices.DeleteFunc(w.kinds.Checks, func(c Check) bool {
		return w.day-c.At/1440 > 10 || c.Done != 0 && w.day-c.Done/1440 > checkKeptDays
	})
	w.kinds.During = slices.DeleteFunc(w.kinds.During, func(d during) bool { return w.openByID(d.Episode) < 0 })
}

// residual is by how much a kind's mark shows in a minute; ok is false where the minute cannot show it. least is what a sound instrument may
// have anyway.
func (w *Watcher) residual(kind rules.FaultKind, instrument string, v *view) (r float64, unit string, least float64, ok bool) {
	q := rules.Global
	if instrument == Tracker {
		q = rules.Direct
	}
	for k := range w.setup.Instruments {
		if w.setup.Instruments[k].Present && w.setup.Instruments[k].ID == instrument {
			q = rules.Quantity(k)
		}
	}
	x := v.value[q]
	switch kind {
	case rules.SignalLost, rules.SignalFrozen:
		return w.stillOrGone(kind, q, v), "1", checkTimes, v.sunUp || q.Longwave()
	case rules.Noise:
		if int(q) >= len(v.swing) {
			return 0, "W/m2", checkWm2, false
		}
		r = math.Abs(v.swing[q])
		return r, "W/m2", checkWm2, v.night && !math.IsNaN(r) // by day the sky swings too
	case rules.ZeroOffset, rules.VentilationLost:
		ok = v.night && int(q) < len(w.base.zero) && !math.IsNaN(x)
		if ok {
			r = math.Abs(x - w.base.zero[q])
		}
		return r, "W/m2", checkWm2, ok
	case rules.ThermistorBad:
		r = math.Abs(v.bodyC - v.value[rules.AirTemperature] - w.base.bodyAir[0])
		return r, "K", checkK, !math.IsNaN(r)
	case rules.PointingLost:
		k := v.g() / v.clear[rules.Global]
		r = math.Abs(1 - v.b()/v.clear[rules.Direct])
		return r, "1", checkBeam, v.sunUp && k > 0.85 && k < 1.12 && !math.IsNaN(r) && !math.IsInf(r, 0)
	case rules.DataGap, rules.Shadow, rules.RangeClipped, rules.InstrumentTouched, rules.SensitivityDrift:
		return 0, "", 0, false
	}
	r = math.Abs(v.g()/v.sum - 1)
	return r, "1", checkClosure, int(q) < len(v.swing) && v.sunUp && v.sum > 80 && float64(v.b()*v.mu) > 40 && !math.IsNaN(r)
}

// stillOrGone is 1 where a signal stands still or is not there, 0 where it lives.
func (w *Watcher) stillOrGone(kind rules.FaultKind, q rules.Quantity, v *view) float64 {
	x := v.value[q]
	switch {
	case math.IsNaN(x):
		return 1
	case kind == rules.SignalFrozen && v.run[q] > 2:
		return 1
	case kind == rules.SignalLost && int(q) < len(v.expected) && math.Abs(x) < openCircuitWm2 && v.expected[q] > 60:
		return 1
	}
	return 0
}

// Checks lists the repairs that are looked at, the oldest first.
func (w *Watcher) Checks() []Check { return slices.Clone(w.kinds.Checks) }

func (c KindCarry) clone() KindCarry {
	c.Checks, c.During = slices.Clone(c.Checks), slices.Clone(c.During)
	return c
}
