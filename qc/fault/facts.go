package fault

import (
	"fluxwarden/rules"
)

// DayFacts is what one day taught, quantised. Minutes under an open or strongly suspected fault are left out.
type DayFacts struct {
	Day         int64         `json:"day,omitempty"` // since 1970
	Closure     Fact          `json:"closure"`
	Sector      [sectors]Fact `json:"sector"`
	Overcast    Fact          `json:"overcast"`
	Zero        [3]Fact       `json:"zero"`
	ClearLW     Fact          `json:"clear_lw"`
	BodyAir     [2]Fact       `json:"body_air"`
	SkyModel    string        `json:"sky_model,omitempty"`   // that the next two are of
	Aerosol     Fact          `json:"aerosol,omitzero"`      // sky.LogOf the load; N counts one clear minute in five
	DiffuseGain Fact          `json:"diffuse_gain,omitzero"` // measured over modelled diffuse under it
	Kinds       KindFacts     `json:"kinds"`
}

// A gatherFacts collects a day's facts minute by minute.
type gatherFacts struct {
	closure     histogram
	sector      [sectors]histogram
	overcast    histogram
	zero        [3]histogram
	clearLW     histogram
	bodyAir     [2]histogram
	aerosol     histogram
	diffuseGain histogram
	window      clearMinutes
	kinds       gatherKinds
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
	f.aerosol = newHistogram(-4.61, 1.15, 0.02) // of the logarithm: loads of 0 to 3
	f.diffuseGain = newHistogram(0.2, 3, 0.01)
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
	if b > 200 && v.steady && sum > 100 && !w.clockSuspected() {
		f.closure.add(g / sum)
		f.sector[sectorOf(v)].add(g / sum)
	}
	f.sky(w, v)
}

// Tainted says whether what the primary instrument of a quantity says is in doubt at the minute in hand.
func (w *Watcher) Tainted(q rules.Quantity) bool { return w.tainted(q) }

// tainted says whether what an instrument says is in doubt: an open episode on it, or on what upsets it.
func (w *Watcher) tainted(q rules.Quantity) bool {
	id := w.setup.Instruments[q].ID
	for i := range w.open {
		e := &w.open[i]
		if e.Severity != rules.Act || accountsForNothing.Has(e.Kind) {
			continue
		}
		if e.Instrument == id || e.Instrument == Logger || e.Instrument == Tracker && (q == rules.Direct || q == rules.Diffuse) || e.snowOnBoth(w.setup, q) {
			return true
		}
	}
	return false
}

func (f *gatherFacts) close(w *Watcher) DayFacts {
	out := DayFacts{Day: w.day, Closure: f.closure.fact(), Overcast: f.overcast.fact(), ClearLW: f.clearLW.fact()}
	if f.aerosol.n > 0 {
		out.SkyModel, out.Aerosol, out.DiffuseGain = w.setup.Sky.Model().String(), f.aerosol.fact(), f.diffuseGain.fact()
	}
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
