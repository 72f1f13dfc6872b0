package fault

import (
	"math"

	"fluxwarden/rules"
)

// A drift is too slow for any day to show. Under thick cloud global over diffuse is the ratio of the two gains, blind to levelling,
// clock, tracker and the sun's height; day after day its median stands on one line. With the sun high the closure tells which of the two
// it is, and a closure that drifts while that ratio stands still is the beam's.
const (
	driftDays    = 10     // with a median, at least
	driftSpan    = 18.0   // days from the first to the last
	driftZ       = 3.3    // of Kendall's statistic: one in a thousand by chance
	driftLeast   = 0.016  // over the span, of global or diffuse: what ISO 9060:2018 allows class B in a year (1.5 %, from memory)
	driftBeam    = 0.04   // over the span, of the beam: the closure also changes with the season
	driftActs    = 0.025  // over the span, of global or diffuse
	driftGone    = 0.6    // of the least, below which an episode ends
	driftMinutes = 20     // that a day's median must rest on
	dullOfHigh   = 0.25   // how much of a drift of diffuse shows in the closure with the sun high
	stepDays     = 3      // on either side of a jump, at least
	stepBetter   = 0.85   // of the line's scatter that a jump must leave at most
	stepStays    = 1.15   // the same once it is told
	driftUnclear = 0.0004 // per day, by which two explanations must differ to be told apart
)

// A trend is the line through a fact's days.
type trend struct {
	slope, z float64 // per day; Kendall's statistic
	step     float64 // by which the days jump, if one jump describes them better than the line does; else 0
	stepDay  int64   // the first day after it
	span     float64 // days
	n        int
}

// total is the change over the span; nothing where there is no line.
func (t *trend) total() float64 {
	if t.n < driftDays || t.span < driftSpan {
		return 0
	}
	return t.slope * t.span
}

func (t *trend) sure() bool { return t.n >= driftDays && t.span >= driftSpan && math.Abs(t.z) > driftZ }

func trendOf(days []KindFacts, better float64, pick func(*KindFacts) Fact) trend {
	var at, value []float64
	for i := range days {
		if f := pick(&days[i]); f.N >= driftMinutes && f.Median.Float() > 0 {
			at, value = append(at, float64(days[i].Day)), append(value, f.Median.Float())
		}
	}
	t := trend{n: len(at)}
	if t.n < 3 {
		return t
	}
	t.span = at[t.n-1] - at[0]
	t.slope, t.z = theilSen(at, value)
	t.step, t.stepDay = stepOf(at, value, t.slope, better)
	level := middle(value) // it sorts
	t.slope, t.step = t.slope/level, t.step/level
	return t
}

// stepOf looks for the one jump that leaves the least scatter (the sum of absolute deviations from the medians before and after), and
// gives it if that is less than a share of what the line leaves; days are ascending.
func stepOf(at, value []float64, slope, better float64) (size float64, day int64) {
	n := len(at)
	off := make([]float64, n)
	for i := range at {
		off[i] = value[i] - float64(slope*at[i])
	}
	least := float64(better * deviation(off))
	for k := stepDays; k <= n-stepDays; k++ {
		before, after := append(off[:0], value[:k]...), append([]float64(nil), value[k:]...)
		left := deviation(before) + deviation(after)
		if left < least {
			least = left
			size, day = middle(append(off[:0], value[k:]...))-middle(append([]float64(nil), value[:k]...)), int64(at[k])
		}
	}
	return size, day
}

// deviation is the sum of the distances from the median; it sorts.
func deviation(values []float64) float64 {
	m, sum := middle(values), 0.0
	for _, v := range values {
		sum += math.Abs(v - m)
	}
	return sum
}

// watchDrift looks for a line through the days.
func (w *Watcher) watchDrift(days []KindFacts) {
	for _, q := range threeShortwave {
		if !w.setup.Instruments[q].Present {
			return
		}
	}
	better := stepBetter
	if w.openByID(w.kinds.Jump) >= 0 {
		better = stepStays
	}
	dull := trendOf(days, better, func(f *KindFacts) Fact { return f.Dull })
	high := trendOf(days, better, func(f *KindFacts) Fact { return f.High })
	found, slope, span, step := rules.Quantity(rules.QuantityCount), 0.0, 0.0, jumpOf{}
	switch {
	case dull.sure() && math.Abs(dull.total()) > driftLeast:
		found, slope, span, step = rules.Global, dull.slope, dull.span, jumpOf{dull.step, dull.stepDay}
		if high.n >= driftDays/2 && math.Abs(high.slope-float64(dullOfHigh*dull.slope)) < math.Abs(high.slope-dull.slope)-driftUnclear {
			found, slope, step.size = rules.Diffuse, -dull.slope, -dull.step
		}
	case high.sure() && math.Abs(high.total()) > driftBeam && dull.n >= driftDays && math.Abs(dull.total()) < 0.3*math.Abs(high.total()):
		found, slope, span, step = rules.Direct, -high.slope, high.span, jumpOf{-high.step, high.stepDay}
	}
	if found == rules.QuantityCount || step.size == 0 {
		w.endJump()
	}
	for _, q := range threeShortwave {
		if q == found {
			w.raiseDrift(q, slope, span, step)
			continue
		}
		i := w.openIndex(w.setup.Instruments[q].ID, rules.SensitivityDrift)
		gone := math.Abs(dull.total()) < driftGone*driftLeast && math.Abs(high.total()) < driftGone*driftBeam
		if i >= 0 && (gone || found < rules.QuantityCount) {
			w.finish(i, w.now.minute+1)
		}
	}
}

// A jumpOf is a change from one day to the next; of size 0 there is none.
type jumpOf struct {
	size float64
	day  int64
}

func (w *Watcher) raiseDrift(q rules.Quantity, slope, span float64, jump jumpOf) {
	if jump.size != 0 {
		w.raiseJump(q, jump)
		return
	}
	total := slope * span
	severity := rules.Watch
	if math.Abs(total) > driftActs && q != rules.Direct || math.Abs(total) > 2*driftActs {
		severity = rules.Act
	}
	evidence := []Evidence{{"drift", roundTo(100*total, 10), "%"}, {"days", span, "1"}, {"per_month", roundTo(3000*slope, 10), "%"}}
	if i := w.openIndex(w.setup.Instruments[q].ID, rules.SensitivityDrift); i >= 0 {
		e := &w.open[i]
		e.Evidence = evidence
		if e.Severity == rules.Watch && severity == rules.Act {
			e.Severity, e.Raised = severity, w.now.minute
			e.Rev++
		}
		return
	}
	var also []rules.FaultKind
	if total < 0 {
		also = []rules.FaultKind{rules.DomeSoiled} // dirt that no rain has washed off sinks like this
	}
	w.raise(Episode{Instrument: w.setup.Instruments[q].ID, Kind: rules.SensitivityDrift, Also: also, Severity: severity,
		From: w.hindsight(w.now.minute - hindsightMinutes), Raised: w.now.minute, Confidence: confidence(4), Evidence: evidence})
}

// raiseJump tells a change of gain that only the days show, and that is no drift. It is watched: what is large shows within hours, and is
// the imbalance's to tell. What the last thirty days all have is the new usual, and nobody's fault.
func (w *Watcher) raiseJump(q rules.Quantity, jump jumpOf) {
	id := w.setup.Instruments[q].ID
	if i := w.openIndex(id, rules.SensitivityDrift); i >= 0 {
		w.finish(i, w.now.minute+1)
	}
	evidence := []Evidence{{"gain", roundTo(1+jump.size, 1000), "1"}, {"days_since", float64(w.day - jump.day), "1"}}
	if i := w.openByID(w.kinds.Jump); i >= 0 {
		w.open[i].Evidence = evidence
		return
	}
	e := w.raise(Episode{Instrument: id, Kind: rules.SensitivityWrong, Also: []rules.FaultKind{rules.SensitivityDrift}, Severity: rules.Watch,
		From: w.hindsight(jump.day * 1440), Raised: w.now.minute, Confidence: confidence(2), Evidence: evidence})
	if e != nil {
		w.kinds.Jump = e.ID
	}
}

// endJump lets the jump go that the days no longer show.
func (w *Watcher) endJump() {
	if i := w.openByID(w.kinds.Jump); i >= 0 {
		w.finish(i, w.now.minute+1)
	}
	w.kinds.Jump = ""
}

func (w *Watcher) openByID(id string) int {
	for i := range w.open {
		if id != "" && w.open[i].ID == id {
			return i
		}
	}
	return -1
}
