package fault

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/rules"
)

// historyViews is how many minutes the evidence can look back on.
const historyViews = 6

// A view is one minute as the evidence looks at it. Irradiances are in W/m2, NaN where absent.
type view struct {
	minute     int64
	zenithDeg  float64
	azimuthDeg float64
	mu         float64
	sa         float64
	sunUp      bool // high enough for global, direct and diffuse to be held against each other
	night      bool
	conflict   bool
	value      [rules.QuantityCount]float64
	marked     [rules.QuantityCount]bool
	silent     [rules.RadiationCount]bool // somebody is at work on it: see silence
	run        [rules.QuantityCount]int
	bodyC, net float64
	fan        [rules.RadiationCount]House
	tracker    House
	supply     House
	rainMM     float64 // in the minute; NaN where not sent
	clear      [rules.RadiationCount]float64
	// what the other two of global, direct and diffuse say that this one should be, at the station's own closure
	expected [3]float64
	// how far each stood off its neighbours' mean a minute ago
	swing  [3]float64
	sum    float64 // direct on the horizontal plus diffuse, at the station's own closure
	steady bool    // the sum moved little since the minute before
	room   float64 // what workScale gives
}

const (
	// evidenceMu is the least cosine of the sun at which shortwave instruments are held against each other.
	evidenceMu = 0.1
	// nightZenithDeg is where no shortwave is left.
	nightZenithDeg = 97
)

func (v *view) forget() {
	nan := math.NaN()
	*v = view{minute: noMinute, sum: nan, bodyC: nan, net: nan, rainMM: nan}
	for i := range v.value {
		v.value[i] = nan
	}
	for i := range v.clear {
		v.clear[i] = nan
	}
	for i := range v.expected {
		v.expected[i] = nan
	}
}

func (v *view) g() float64 { return v.value[rules.Global] }
func (v *view) b() float64 { return v.value[rules.Direct] }
func (v *view) d() float64 { return v.value[rules.Diffuse] }

// look makes the view of a minute and fills in the minute's clear sky.
func (v *view) look(w *Watcher, m *Minute) {
	v.minute, v.zenithDeg, v.azimuthDeg, v.mu, v.sa = m.Minute, m.ZenithDeg, m.AzimuthDeg, m.Mu, m.SaWm2
	v.sunUp = m.Mu > evidenceMu && !m.Hidden
	v.night = m.ZenithDeg > nightZenithDeg
	v.conflict = m.AnyConflict
	v.value, v.marked, v.run = m.Value, m.Marked, m.Run
	v.bodyC, v.net = m.BodyC, m.NetWm2
	v.fan, v.tracker, v.supply, v.rainMM = m.Fan, m.Tracker, m.Supply, m.PrecipitationMM
	w.silence(v)
	w.clearSky(m)
	v.clear = m.Clear
	c := w.base.closureAt(v)
	beam := float64(v.b() * v.mu)
	v.sum = c * (beam + v.d())
	v.expected[rules.Global] = v.sum
	v.expected[rules.Diffuse] = v.g()/c - beam
	v.expected[rules.Direct] = math.NaN()
	if v.mu > evidenceMu {
		v.expected[rules.Direct] = (v.g()/c - v.d()) / v.mu
	}
	before, older := w.prev(0), w.prev(1)
	for q := range v.swing {
		v.swing[q] = before.value[q] - float64((older.value[q]+v.value[q])/2)
	}
	v.room = v.workScale(w)
	v.steady = before.minute == v.minute-1 && math.Abs(v.sum-before.sum) < float64(0.03*v.sum)+3
}

// workScale is how well one expected value can be held against one measured, W/m2: a share of it, the offset of a good instrument, and,
// on the edge of a cloud, part of what changed within the minute, for instruments do not follow alike.
func (v *view) workScale(w *Watcher) float64 {
	moved := 0.0
	for i := range historyViews {
		if p := w.prev(i); p.minute >= v.minute-2 && !math.IsNaN(p.sum) && !math.IsNaN(v.sum) {
			moved = max(moved, math.Abs(v.sum-p.sum))
		}
	}
	return 8 + float64(0.03*math.Abs(v.sum)) + float64(0.5*moved)
}

func expOf(x float64) float64 { return exact.Exp(x) }
