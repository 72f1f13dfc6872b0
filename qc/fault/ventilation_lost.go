package fault

import (
	"math"

	"fluxwarden/rules"
)

// Without a fan the air about the dome stands still, the dome cools further under a clear sky, and the zero follows it down (the zero
// offset a of ISO 9060). The offset grows with the sky's cooling, where an offset of the electronics stays the same under cloud.
const (
	ventilationLeastWm2 = 2.0 // by which the zero of a clear night must stand lower than usual
	ventilationShare    = 0.6 // and by which share of the usual
	ventilationMinutes  = 60  // of a night under a clear sky
	ventilationNights   = 3   // that must have taught what is usual
	ventilationAct      = 2   // clear nights on end before somebody should act
	ventilationStands   = 1.0 // W/m2 below the usual, for the beginning
	// ventilationMost is the greatest zero that still air gives, for each W/m2 of net longwave: ISO 9060:2018 allows class B 15 W/m2 at 200
	// (from memory), unventilated; half as much again.
	ventilationMost = 0.11
)

// watchVentilation holds the day's clear-sky night zero against the nights before.
func (w *Watcher) watchVentilation(days []KindFacts) {
	today := &days[len(days)-1]
	for k, q := range zeroed {
		in := &w.setup.Instruments[q]
		if !in.Present || in.HasFan || today.ClearZero[k].N < ventilationMinutes {
			continue
		}
		usual, scatter, nights := usualOf(days[:len(days)-1], ventilationMinutes, func(f *KindFacts) Fact { return f.ClearZero[k] })
		if nights < ventilationNights {
			continue
		}
		zero := today.ClearZero[k].Median.Float()
		lower := usual - zero
		open := w.openIndex(in.ID, rules.VentilationLost)
		switch {
		case lower > max(ventilationLeastWm2, ventilationShare*math.Abs(usual), 4*scatter) && -zero < -ventilationMost*today.Net.Median.Float() &&
			!w.steadyOffset(days, k, lower):
			if w.kinds.Nights[k]++; w.kinds.Since[k] == 0 {
				w.kinds.Since[k] = w.facts.kinds.lowSince[k]
			}
			w.raiseVentilation(in.ID, k, open, zero, usual, today.Net.Median.Float())
		case lower < 0.5*max(ventilationLeastWm2, ventilationShare*math.Abs(usual)):
			w.kinds.Nights[k], w.kinds.Since[k] = 0, 0
			if open >= 0 {
				w.finish(open, w.now.minute+1)
			}
		}
	}
}

// steadyOffset says whether the zero has sunk as far under cloud as under the clear sky: then it is no matter of ventilation.
func (w *Watcher) steadyOffset(days []KindFacts, k int, lower float64) bool {
	today := &days[len(days)-1]
	if today.DullZero[k].N < ventilationMinutes {
		return false
	}
	usual, _, nights := usualOf(days[:len(days)-1], ventilationMinutes, func(f *KindFacts) Fact { return f.DullZero[k] })
	return nights > 0 && usual-today.DullZero[k].Median.Float() > 0.7*lower
}

func (w *Watcher) raiseVentilation(id string, k, open int, zero, usual, net float64) {
	evidence := []Evidence{{"night_zero_clear", roundTo(zero, 10), "W/m2"}, {"usual", roundTo(usual, 10), "W/m2"},
		{"net_longwave", roundTo(net, 1), "W/m2"}, {"nights", float64(w.kinds.Nights[k]), "1"}}
	if zero := w.openIndex(id, rules.ZeroOffset); zero >= 0 && open < 0 { // the nights have shown that the offset goes with the sky
		open = zero
		e := &w.open[zero]
		e.Kind, e.Also, e.Advice = rules.VentilationLost, []rules.FaultKind{rules.ZeroOffset}, rules.VentilationLost.Entry().Advice
		e.Rev++
	}
	if open >= 0 {
		e := &w.open[open]
		e.Evidence = evidence
		if e.Severity == rules.Watch && w.kinds.Nights[k] >= ventilationAct {
			e.Severity, e.Raised, e.Also = rules.Act, w.now.minute, nil
			e.Rev++
		}
		return
	}
	e := Episode{Instrument: id, Kind: rules.VentilationLost, Also: []rules.FaultKind{rules.ZeroOffset}, Severity: rules.Watch,
		From: w.hindsight(w.kinds.since(k, w.day)), Raised: w.now.minute, Confidence: confidence(2), Evidence: evidence}
	if w.kinds.Nights[k] >= ventilationAct {
		e.Severity, e.Also, e.Confidence = rules.Act, nil, confidence(5)
	}
	w.raise(e)
}

// ventilationDoubted says whether an instrument's zero is known, or suspected, to go with the sky.
func (w *Watcher) ventilationDoubted(q rules.Quantity) bool {
	for k := range zeroed {
		if zeroed[k] == q {
			return w.kinds.Nights[k] > 0
		}
	}
	return false
}

// usualOf is the median over days of a fact, how far the days scatter about it (1.4826 times the median absolute deviation), and how many
// days rest on enough minutes.
func usualOf(days []KindFacts, least int, pick func(*KindFacts) Fact) (median, scatter float64, n int) {
	values := make([]float64, 0, len(days))
	for i := range days {
		if f := pick(&days[i]); f.N >= least && !math.IsNaN(f.Median.Float()) {
			values = append(values, f.Median.Float())
		}
	}
	if len(values) == 0 {
		return math.NaN(), math.NaN(), 0
	}
	median = middle(values)
	for i := range values {
		values[i] = math.Abs(values[i] - median)
	}
	return median, 1.4826 * middle(values), len(values)
}

// since is the minute at which lost ventilation began to show, at the latest the day's first.
func (c *KindCarry) since(k int, day int64) int64 {
	if c.Since[k] == 0 {
		return day * 1440
	}
	return c.Since[k]
}

// fanStopped: the fan's speed is out of its range. Fans that stop together, or one that blows on several domes, are one fault: it is told of
// the first of the instruments.
func fanStopped(w *Watcher, c *faultCase, v *view) hint {
	switch v.fan[c.quantity] {
	case HouseSound:
		return hint{odds: -1}
	case HouseUnknown:
		return nothing
	}
	for q := range c.quantity {
		if v.fan[q] == HouseOut {
			return nothing
		}
	}
	return hint{odds: 0.4}
}
