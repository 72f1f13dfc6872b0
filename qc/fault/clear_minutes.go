package fault

import (
	"math"

	"fluxwarden/qc/sky"
	"fluxwarden/rules"
)

const (
	// skySampleEvery is of how many clear minutes one is fitted: the sky of the next ones is much the same.
	skySampleEvery = 5
	// clearWindow is how many minutes must look clear together; the last of them is then clear. It is the window of Reno and Hansen 2016 and
	// that of Long and Ackerman 2000, looking back only.
	clearWindow = 11
	// clearDirectWm2 is the least beam of a clear minute.
	clearDirectWm2 = 120
	// aerosolStep is the step of load that the models' slope is taken over.
	aerosolStep = 0.02
)

// A clearMinutes holds the last minutes as the search for clear ones looks at them.
type clearMinutes struct {
	minute                [clearWindow]int64
	global, model, ratio  [clearWindow]float64
	ordered, orderedModel [clearWindow]float64
	orderedRatio          [clearWindow]float64
	at                    int
}

// note takes a minute with the sun up.
func (c *clearMinutes) note(v *view) {
	c.at++
	if c.at == clearWindow {
		c.at = 0
	}
	c.minute[c.at], c.global[c.at], c.model[c.at], c.ratio[c.at] = v.minute, v.g(), v.clear[rules.Global], v.d()/v.g()
}

// clear says whether the window that ends now is clear: global as smooth as a cloudless model scaled to it (Reno and Hansen 2016), and the
// diffuse ratio as steady as Long and Ackerman 2000 ask.
func (c *clearMinutes) clear(mu float64) bool {
	newest := c.minute[c.at]
	var sum, sumModel float64
	for k := range clearWindow {
		i := (c.at + 1 + k) % clearWindow
		if c.minute[i] != newest-int64(clearWindow-1-k) {
			return false
		}
		c.ordered[k], c.orderedModel[k], c.orderedRatio[k] = c.global[i], c.model[i], c.ratio[i]
		sum, sumModel = sum+c.global[i], sumModel+c.model[i]
	}
	if !(sumModel > 0) {
		return false
	}
	return sky.SteadyRatio(c.orderedRatio[:], mu) && sky.RenoHansenDefaults().ClearWindow(c.ordered[:], c.orderedModel[:], sum/sumModel)
}

// sky fits the load of a clear minute.
func (f *gatherFacts) sky(w *Watcher, v *view) {
	f.window.note(v)
	if v.minute%skySampleEvery != 0 || !(v.b() > clearDirectWm2 && v.mu > 0.15 && v.steady && v.d() < 0.5*v.g()) || !w.smooth(v) || !f.window.clear(v.mu) {
		return
	}
	if v.b() > 0.8*v.clear[rules.Direct] && !w.tainted(rules.LWDown) {
		f.clearLW.addTimes(v.value[rules.LWDown]/clearLongwave(v.value[rules.AirTemperature], v.value[rules.Humidity]), skySampleEvery)
	}
	st := w.cloudless.table.State()
	st.Aerosol = w.setup.Sky.AerosolOf(v.b(), v.zenithDeg, v.sa, &st)
	if !(st.Aerosol < sky.AerosolMax) {
		return
	}
	more := st
	more.Aerosol += aerosolStep
	at, beyond := w.setup.Sky.At(v.zenithDeg, v.sa, &st), w.setup.Sky.At(v.zenithDeg, v.sa, &more)
	load := sky.Together(st.Aerosol, aerosolStep, at, beyond, w.base.sky.DiffuseGain, v.d())
	f.aerosol.add(sky.LogOf(load))
	if at.DiffuseWm2 > 0 {
		f.diffuseGain.add(v.d() / at.DiffuseWm2)
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
