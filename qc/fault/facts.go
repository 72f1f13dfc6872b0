package fault

import (
	"math"

	"fluxwarden/rules"
)

// DayFacts is what one day taught, quantised. Minutes under an open or strongly suspected fault are left out.
type DayFacts struct {
	Closure      Fact          `json:"closure"`
	Sector       [sectors]Fact `json:"sector"`
	Overcast     Fact          `json:"overcast"`
	Zero         [3]Fact       `json:"zero"`
	Linke        Fact          `json:"linke"`
	ClearGlobal  Fact          `json:"clear_global"`
	ClearDiffuse Fact          `json:"clear_diffuse"`
	ClearLW      Fact          `json:"clear_lw"`
	BodyAir      [2]Fact       `json:"body_air"`
	Kinds        KindFacts     `json:"kinds"`
}

// A gatherFacts collects a day's facts minute by minute.
type gatherFacts struct {
	closure      histogram
	sector       [sectors]histogram
	overcast     histogram
	zero         [3]histogram
	linke        histogram
	clearGlobal  histogram
	clearDiffuse histogram
	clearLW      histogram
	bodyAir      [2]histogram
	kinds        gatherKinds
}

func (f *gatherFacts) reset(w *Watcher) {
	f.closure = newHistogram(0.5, 1.5, 0.0025)
	for k := range f.sector {
		f.sector[k] = newHistogram(0.5, 1.5, 0.0025)
	}
	f.overcast = newHistogram(0.5, 1.5, 0.0025)
	for k := range f.zero {
		f.zero[k] = newHistogram(-60, 60, 0.25)
	}
	f.linke = newHistogram(1, 9, 0.05)
	f.clearGlobal = newHistogram(0.5, 1.5, 0.005)
	f.clearDiffuse = newHistogram(0.2, 3, 0.02)
	f.clearLW = newHistogram(0.6, 1.6, 0.005)
	for k := range f.bodyAir {
		f.bodyAir[k] = newHistogram(-15, 15, 0.1)
	}
	f.kinds.reset(w)
}

// minute takes one minute's facts.
func (f *gatherFacts) minute(w *Watcher, v *view) {
	f.kinds.minute(w, v)
	for k, q := range [3]rules.Quantity{rules.Global, rules.Direct, rules.Diffuse} {
		if v.night && !w.tainted(q) {
			f.zero[k].add(v.value[q])
		}
	}
	if v.bodyC == v.bodyC && !w.tainted(rules.LWDown) {
		k := 0
		if v.mu > 0 {
			k = 1
		}
		f.bodyAir[k].add(v.bodyC - v.value[rules.AirTemperature])
	}
	if !v.sunUp || w.tainted(rules.Global) || w.tainted(rules.Direct) || w.tainted(rules.Diffuse) {
		return
	}
	g, b, d := v.g(), v.b(), v.d()
	if b < 2 && d > 80 {
		f.overcast.add(g / d)
	}
	sum := float64(b*v.mu) + d
	if b > 200 && v.steady && sum > 100 {
		f.closure.add(g / sum)
		f.sector[sectorOf(v)].add(g / sum)
	}
	f.sky(w, v)
}

// sky takes what a steady minute with much beam says of the clear sky.
func (f *gatherFacts) sky(w *Watcher, v *view) {
	g, b, d := v.g(), v.b(), v.d()
	if !(b > 250 && v.mu > 0.2 && v.steady) || !w.smooth(v) {
		return
	}
	tl := w.base.linkeOf(v)
	f.linke.add(tl)
	cg, cn := w.base.withLinke(tl, v)
	f.clearGlobal.add(g / cg)
	f.clearDiffuse.add(d / (cg - float64(cn*v.mu)))
	if b > 0.8*v.clear[rules.Direct] && !w.tainted(rules.LWDown) {
		f.clearLW.add(v.value[rules.LWDown] / clearLongwave(v.value[rules.AirTemperature], v.value[rules.Humidity]))
	}
}

// smooth says whether the last minutes all had much beam and moved little, as under a clear sky.
func (w *Watcher) smooth(v *view) bool {
	for i := range historyViews {
		p := w.prev(i)
		if p.minute != v.minute-1-int64(i) || !(math.Abs(p.b()-v.b()) < 0.015*v.b()*float64(i+1)) {
			return false
		}
	}
	return true
}

// tainted says whether what an instrument says is in doubt: an open episode on it, or on what upsets it.
func (w *Watcher) tainted(q rules.Quantity) bool {
	id := w.setup.Instruments[q].ID
	for i := range w.open {
		e := &w.open[i]
		if e.Severity != rules.Act || accountsForNothing.Has(e.Kind) {
			continue
		}
		if e.Instrument == id || e.Instrument == Logger || e.Instrument == Tracker && (q == rules.Direct || q == rules.Diffuse) {
			return true
		}
	}
	return false
}

func (f *gatherFacts) close(w *Watcher) DayFacts {
	out := DayFacts{Closure: f.closure.fact(), Overcast: f.overcast.fact(), Linke: f.linke.fact(), ClearGlobal: f.clearGlobal.fact(),
		ClearDiffuse: f.clearDiffuse.fact(), ClearLW: f.clearLW.fact()}
	for k := range f.sector {
		out.Sector[k] = f.sector[k].fact()
	}
	for k := range f.zero {
		out.Zero[k] = f.zero[k].fact()
	}
	for k := range f.bodyAir {
		out.BodyAir[k] = f.bodyAir[k].fact()
	}
	out.Kinds = f.kinds.close(w, &out)
	return out
}
