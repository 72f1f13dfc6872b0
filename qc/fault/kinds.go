package fault

import (
	"math"
	"slices"

	"fluxwarden/rules"
)

// KindFacts is what a day taught for the kinds that only days can show.
type KindFacts struct {
	Day       int64   `json:"day,omitempty"`
	ClearZero [2]Fact `json:"clear_zero"` // night value of global and diffuse under a sky that cools, W/m2
	DullZero  [2]Fact `json:"dull_zero"`  // the same under a sky that does not
	Net       Fact    `json:"net"`        // net longwave of the minutes of ClearZero, W/m2
	High      Fact    `json:"high"`       // closure with the sun high
	Dull      Fact    `json:"dull"`       // global over diffuse without a beam; an open drift does not keep it out
	Beam      Fact    `json:"beam"`       // the day's aerosol load, see DayFacts
}

// gatherKinds collects a day's KindFacts.
type gatherKinds struct {
	clearZero, dullZero [2]histogram
	net, high, dull     histogram
	usualZero           [2]float64 // of the clear nights before; NaN where it is not known
	lowSince            [2]int64   // since when the clear night zero has stood below it without a break; 0 where it does not
}

func (f *gatherKinds) reset(w *Watcher) {
	for k := range f.usualZero {
		usual, _, nights := usualOf(w.taught, ventilationMinutes, func(f *KindFacts) Fact { return f.ClearZero[k] })
		if nights < ventilationNights {
			usual = math.NaN()
		}
		f.usualZero[k] = usual
	}
	for k := range f.clearZero {
		f.clearZero[k], f.dullZero[k] = newHistogram(-30, 30, 0.125), newHistogram(-30, 30, 0.125)
	}
	f.net = newHistogram(-160, 20, 1)
	f.high, f.dull = newHistogram(0.5, 1.5, 0.001), newHistogram(0.5, 1.5, 0.001)
}

const (
	// coolingNetWm2 is a net longwave under which the sky cools a detector, dullNetWm2 one under which it hardly does.
	coolingNetWm2 = -40
	dullNetWm2    = -15
	// highMu is the least cosine of the sun for the closure of a high sun.
	highMu = 0.45
)

// zeroed are the instruments whose zero the sky's cooling moves: a pyrheliometer's hardly (WMO-No. 8, chapter 7).
var zeroed = [2]rules.Quantity{rules.Global, rules.Diffuse}

// minute takes one minute's facts.
func (f *gatherKinds) minute(w *Watcher, v *view) {
	if v.night {
		net := v.value[rules.LWDown] - blackBodyC(v.value[rules.AirTemperature])
		into := &f.clearZero
		switch {
		case net < coolingNetWm2:
			f.net.add(net)
		case net > dullNetWm2:
			into = &f.dullZero
		default:
			return // between the two, or not known
		}
		for k, q := range zeroed {
			x := v.value[q]
			into[k].add(x)
			switch {
			case !(x < f.usualZero[k]-ventilationStands):
				f.lowSince[k] = 0
			case f.lowSince[k] == 0:
				f.lowSince[k] = v.minute
			}
		}
		return
	}
	if !v.sunUp || v.mu < 0.2 || w.tainted(rules.Global) || w.tainted(rules.Direct) || w.tainted(rules.Diffuse) {
		return
	}
	switch g, b, d := v.g(), v.b(), v.d(); {
	case b < 2 && d > 80:
		f.dull.add(g / d)
	case b > 300 && v.mu > highMu && v.steady:
		f.high.add(g / (float64(b*v.mu) + d))
	}
}

func (f *gatherKinds) close(w *Watcher, day *DayFacts) KindFacts {
	out := KindFacts{Day: w.day, Net: f.net.fact(), High: f.high.fact(), Dull: f.dull.fact(), Beam: day.Aerosol}
	for k := range f.clearZero {
		out.ClearZero[k], out.DullZero[k] = f.clearZero[k].fact(), f.dullZero[k].fact()
	}
	return out
}

// KindCarry is what the kinds of this file hand on over midnight.
type KindCarry struct {
	Nights [2]int   `json:"nights"` // clear nights on end whose zero spoke for lost ventilation, of global and diffuse
	Since  [2]int64 `json:"since"`  // since when
	Checks []Check  `json:"checks,omitempty"`
	During []during `json:"during,omitempty"`
	Spot   spot     `json:"spot"`
	// BeamLow is by which share direct was low, in the minutes in which it missed the sun in part.
	BeamLow mean   `json:"beam_low"`
	Jump    string `json:"jump,omitempty"` // id of the open episode of a change of gain that only the days show
}

// endKinds asks, once a day, the kinds that only days can show.
func (w *Watcher) endKinds(facts *DayFacts) {
	days := append(append(make([]KindFacts, 0, len(w.taught)+1), w.taught...), facts.Kinds)
	w.watchVentilation(days)
	w.watchDrift(days)
	w.forgetChecks()
}

// theilSen is the median of the slopes between all pairs of points (Theil 1950; Sen 1968, J. Am. Stat. Assoc. 63, 1379), and Kendall's
// statistic over its own scatter without a trend (Mann 1945, Econometrica 13, 245; ties left out of the variance); NaN and 0 for fewer
// than three points.
func theilSen(at, value []float64) (slope, z float64) {
	n := len(at)
	if n < 3 {
		return math.NaN(), 0
	}
	slopes := make([]float64, 0, n*(n-1)/2)
	s := 0
	for i := range at {
		for k := i + 1; k < n; k++ {
			if at[k] == at[i] {
				continue
			}
			switch rise := value[k] - value[i]; {
			case rise > 0:
				s++
			case rise < 0:
				s--
			}
			slopes = append(slopes, (value[k]-value[i])/(at[k]-at[i]))
		}
	}
	if len(slopes) == 0 {
		return math.NaN(), 0
	}
	variance := float64(n*(n-1)*(2*n+5)) / 18
	switch {
	case s > 0:
		s--
	case s < 0:
		s++
	}
	return middle(slopes), float64(s) / math.Sqrt(variance)
}

// middle sorts the values and gives their median; NaN without any.
func middle(values []float64) float64 {
	n := len(values)
	if n == 0 {
		return math.NaN()
	}
	slices.Sort(values)
	if n%2 == 1 {
		return values[n/2]
	}
	return (values[n/2-1] + values[n/2]) / 2
}
