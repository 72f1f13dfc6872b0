package fault

import (
	"math"

	"fluxwarden/rules"
)

// An imbalance is what a station gathers while global, direct and diffuse do not close as they used to: enough to say which
// of the causes that last for hours or days is the likeliest. It is carried over midnight.
type imbalance struct {
	Score   Number  `json:"score"`
	Since   int64   `json:"since"` // minute at which the present rise began
	Last    int64   `json:"last"`
	N       int     `json:"n"`       // steady minutes with beam
	Sums    sums    `json:"sums"`    // of their relative deviations, for the fits
	First   mean    `json:"first"`   // deviation of the first hour of them
	Recent  Number  `json:"recent"`  // running mean over the last two hours or so
	Dull    mean    `json:"dull"`    // deviation of global over diffuse without a beam
	Sky     [3]mean `json:"sky"`     // global, direct and diffuse over the learnt clear sky, less one, in clear minutes
	Coldest Number  `json:"coldest"` // least air temperature of the eight hours before it and since, degrees C
	DewGap  Number  `json:"dew_gap"` // least before it began, K
	Rise    int64   `json:"rise"`    // sunrise before it began
	Begun   bool    `json:"begun"`
	Arc     arc     `json:"arc"`   // deviation by the sun's bearing, with a beam
	Model   model   `json:"model"` // of the cause that the open episode names
}

// A model is what a cause implies for the closure of a minute.
type model struct {
	K    int `json:"k"` // 0 gain of global, 1 of the beam, 2 of diffuse, 3 tilt
	A, B Number
}

func (m *model) predict(x [regressors]float64) float64 {
	a, b := m.A.Float(), m.B.Float()
	switch m.K {
	case 1:
		return a * x[1]
	case 2:
		return -a * (1 - x[1])
	case 3:
		return float64(a*x[2]) + float64(b*x[3])
	}
	return a
}

// A mean is a running mean.
type mean struct {
	Sum Number `json:"sum"`
	N   int    `json:"n"`
}

func (m *mean) add(v float64) {
	if !math.IsNaN(v) && !math.IsInf(v, 0) {
		m.Sum += Number(v)
		m.N++
	}
}

func (m *mean) of() float64 {
	if m.N == 0 {
		return math.NaN()
	}
	return m.Sum.Float() / float64(m.N)
}

// Regressors of the relative deviation of global from its partners: a gain of global (1), of the beam (its share), a tilt (the
// beam's lever to the east and to the north).
const regressors = 4

// sums are the normal equations of the fits.
type sums struct {
	XX [regressors][regressors]Number `json:"xx"`
	XY [regressors]Number             `json:"xy"`
	YY Number                         `json:"yy"`
}

func (s *sums) add(x [regressors]float64, y float64) {
	for i := range x {
		for k := range x {
			s.XX[i][k] += Number(x[i] * x[k])
		}
		s.XY[i] += Number(x[i] * y)
	}
	s.YY += Number(y * y)
}

const (
	// dullRoom is how far global over diffuse under thick cloud may stand off its usual.
	dullRoom       = 0.018
	imbalanceRaise = 6.0
	imbalanceMost  = 12.0
	// imbalanceQuiet is after how many minutes without a word for it an imbalance is let go.
	imbalanceQuiet = 36 * 60
	// grossly is a deviation that few gains reach: then single minutes usually show a plainer cause, and it is given time.
	grossly = 0.35
	// closureRoom is the relative deviation from the station's own closure that a sound station may always have (own choice; robust
	// daily scatter on measured months is about 1 %).
	closureRoom = 0.025
	// fineRoom is the same for the mean of hours with a high sun and a steady sky.
	fineRoom = 0.016
	// untaughtRoom is the same while the station's own closure is not known yet.
	untaughtRoom = 0.07
)

// watchImbalance takes a minute into the imbalance and raises, renames or ends its episode.
func (w *Watcher) watchImbalance(v *view) {
	im := &w.slow.Imbalance
	if w.watchFouled(v) {
		return
	}
	if w.otherCause() {
		if !w.ownImbalance() {
			*im = imbalance{} // what has gathered was that cause's doing
		}
		return
	}
	if im.Begun && v.minute-im.Last > imbalanceQuiet {
		if open := w.imbalanceEpisode(); open >= 0 {
			w.finish(open, im.Last+1)
		}
		*im = imbalance{}
	}
	if !v.sunUp {
		return
	}
	g, b, d := v.g(), v.b(), v.d()
	if math.IsNaN(g+b+d) || v.run[rules.Global] > 2 || v.run[rules.Diffuse] > 2 || v.run[rules.Direct] > 2 {
		return // what stands still is clipped or frozen
	}
	if g > 60 && d < openCircuitWm2 || d > 60 && g < openCircuitWm2 {
		return // an open input, not a gain
	}
	if b < 2 && g+d > 30 && d > 5 {
		if g > 1.3*d && g > 0.5*v.clear[rules.Global] {
			return // the sun is out, and it is the beam that is lost
		}
		w.dullStep(v, g/d/w.base.overcast-1)
		return
	}
	beam := float64(b * v.mu)
	if beam < 40 || v.sum < 80 {
		return
	}
	delta := g/v.sum - 1
	w.imbalanceStep(v, w.closureRoomAt(v), delta, beam)
}

// closureRoomAt is how far the closure of a sound station may stand off with the sun where it is: what it scatters there by itself, the
// offset of a good instrument, and more on the edge of a cloud.
func (w *Watcher) closureRoomAt(v *view) float64 {
	room := untaughtRoom
	if w.base.known {
		room = max(closureRoom, min(untaughtRoom, 0.012+float64(3*w.base.spread[sectorOf(v)])))
	}
	return room + (4+float64(0.4*w.moved(v)))/v.sum
}

// dullStep takes a minute without a beam: global over diffuse is the ratio of the two gains, blind to levelling, clock and tracker.
func (w *Watcher) dullStep(v *view, delta float64) {
	im := &w.slow.Imbalance
	room := dullRoom + float64(3*w.base.dull) + (1+w.moved(v))/v.sum
	if v.d() < 60 {
		room += 6 / v.d() // the offsets of good instruments
	}
	if w.base.overcastN == 0 {
		room += dullRoom
	}
	off := math.Abs(delta) > room
	if !im.Begun && !off {
		return
	}
	if !im.Begun {
		*im = imbalance{Begun: true, Since: v.minute, DewGap: Number(w.leastDewGap()), Coldest: Number(w.coldest()), Rise: w.sunrise}
	}
	odds := 0.0
	switch {
	case off:
		odds = min(0.2, 0.03*math.Abs(delta)/room)
		im.Last = v.minute
	case im.Model.K == 0 && math.Abs(im.Model.A.Float()) > 2*room:
		odds = -0.1 // a gain of global would show here
	case w.imbalanceEpisode() < 0:
		odds = -0.02
	}
	im.Dull.add(delta)
	im.cold(v)
	im.N++
	im.Recent += Number((delta - im.Recent.Float()) / min(float64(im.N), 60))
	w.imbalanceScore(v, odds)
}

// cold keeps the least air temperature.
func (im *imbalance) cold(v *view) {
	if t := v.value[rules.AirTemperature]; t < im.Coldest.Float() {
		im.Coldest = Number(t)
	}
}

// moved is by how much the sum has changed over the last minutes, W/m2: at the edge of a cloud instruments do not follow alike.
func (w *Watcher) moved(v *view) float64 {
	most := 0.0
	for i := range 2 {
		if p := w.prev(i); p.minute >= v.minute-2 && !math.IsNaN(p.sum) {
			most = max(most, math.Abs(v.sum-p.sum))
		}
	}
	return most
}

// imbalanceOdds is what one minute with beam says. Before an episode is open, every deviation speaks for one, a large one loudly, a small
// one in a good hour softly; then the deviation that its cause implies for this minute is what counts.
func (im *imbalance) imbalanceOdds(open bool, x [regressors]float64, delta, room float64, good bool) float64 {
	off := math.Abs(delta)
	if !open {
		switch {
		case off > room:
			return min(0.25, 0.04*off/room)
		case !good:
			return -0.03 * (1 + min(4, math.Abs(im.Recent.Float())/room))
		case off > fineRoom:
			return 0.012 * off / fineRoom
		}
		return -0.03 * (1 + min(4, math.Abs(im.Recent.Float())/room))
	}
	want := im.Model.predict(x)
	size := math.Abs(want)
	least := 0.6 * room
	if good {
		least = 0.8 * fineRoom
	}
	switch {
	case size < least:
		return 0
	case math.Abs(delta-want) < 0.5*size:
		return min(0.25, 0.04*size/room)
	case off < 0.4*size || delta*want < 0:
		return -min(0.4, 0.08*size/room)
	}
	return 0
}

func (w *Watcher) imbalanceStep(v *view, room, delta, beam float64) {
	im := &w.slow.Imbalance
	share := beam * w.base.closureAt(v) / v.sum
	sinZ := math.Sqrt(max(0, 1-float64(v.mu*v.mu)))
	lever := v.b() * sinZ / v.sum
	x := [regressors]float64{1, share, lever * sinDeg(v.azimuthDeg), lever * cosDeg(v.azimuthDeg)}
	odds := im.imbalanceOdds(w.imbalanceEpisode() >= 0, x, delta, room, v.steady && v.mu > 0.25 && w.base.known)
	if !im.Begun {
		if odds <= 0 {
			return
		}
		*im = imbalance{Begun: true, Since: v.minute, DewGap: Number(w.leastDewGap()), Coldest: Number(w.coldest()), Rise: w.sunrise}
	}
	if odds > 0 {
		im.Last = v.minute
	}
	im.N++
	weight := closureRoom / room
	for i := range x {
		x[i] *= weight
	}
	if odds > 0 || w.imbalanceEpisode() < 0 { // once it is named, what does not bear it out may be its end
		im.Sums.add(x, delta*weight)
	}
	if im.N <= 60 {
		im.First.add(delta)
	}
	im.Recent += Number((delta - im.Recent.Float()) / min(float64(im.N), 60))
	im.Arc.add(v.azimuthDeg, delta)
	im.cold(v)
	if w.base.skyKnown && (v.b() > 0.5*v.clear[rules.Direct] || w.followsClear(v)) {
		im.Sky[0].add(v.g()/v.clear[rules.Global] - 1)
		im.Sky[1].add(v.b()/v.clear[rules.Direct] - 1)
		im.Sky[2].add(v.d()/v.clear[rules.Diffuse] - 1)
	}
	w.imbalanceScore(v, odds)
}

// imbalanceScore takes a minute's odds and raises, renames or ends the episode.
func (w *Watcher) imbalanceScore(v *view, odds float64) {
	im := &w.slow.Imbalance
	im.Score = Number(min(imbalanceMost, im.Score.Float()+odds))
	open := w.imbalanceEpisode()
	switch {
	case im.Score <= 0:
		if open >= 0 {
			if w.becomesFouled(open, v) {
				return
			}
			w.finish(open, im.Last+1)
		}
		*im = imbalance{}
	case open < 0 && odds > 0 && (im.Score >= imbalanceRaise || im.Score >= imbalanceRaise-dewPrior && im.dewy(v)):
		w.raiseImbalance(v)
	case open >= 0 && im.N%30 == 0 && odds > 0:
		w.renameImbalance(open, v)
	}
}

// otherCause says whether an open episode of another kind upsets how the three close.
func (w *Watcher) otherCause() bool {
	for i := range w.open {
		e := &w.open[i]
		if e.ID != w.slow.Episode && e.Severity == rules.Act && upsetsClosing.Has(e.Kind) && w.isShortwave(e.Instrument) {
			return true
		}
	}
	return false
}

// isShortwave says whether an episode's instrument has to do with global, direct or diffuse.
func (w *Watcher) isShortwave(instrument string) bool {
	for _, q := range threeShortwave {
		if w.setup.Instruments[q].ID == instrument {
			return true
		}
	}
	return instrument == Tracker || instrument == Logger
}

// ownImbalance says whether the episode that casts doubt on the instruments is the imbalance's own.
func (w *Watcher) ownImbalance() bool { return w.imbalanceEpisode() >= 0 }

// imbalanceEpisode is the place of the imbalance's open episode, -1 if there is none.
func (w *Watcher) imbalanceEpisode() int {
	if w.slow.Episode == "" {
		return -1
	}
	for i := range w.open {
		if w.open[i].ID == w.slow.Episode {
			return i
		}
	}
	return -1
}

// plainerCause says whether a cause that single minutes show is gathering suspicion: it is given time.
func (w *Watcher) plainerCause() bool {
	for _, i := range w.byDay.cases[:w.byDay.n] {
		if c := &catalogueOfCases[i]; restsOnClosing.Has(c.kind) && c.quantity != rules.LWDown && c.kind != rules.Noise && w.cases[i].Score > 1 {
			return true
		}
	}
	return false
}

// raiseImbalance raises the likeliest cause, once no other instrument is nearly as likely or the wait has been long.
func (w *Watcher) raiseImbalance(v *view) {
	im := &w.slow.Imbalance
	if im.N < 240 && w.plainerCause() {
		return
	}
	c := im.classify(w, v)
	if im.Score < imbalanceRaise && c.kind != rules.DomeWet {
		return
	}
	if sure := math.IsInf(c.lead, 1); !sure && (c.lead < 3 && im.N < 240 || math.Abs(im.Recent.Float()) > grossly && im.N < 120) {
		return
	}
	e := w.raise(Episode{Instrument: c.instrument, Kind: c.kind, Also: c.also, Severity: im.severity(c, v), From: w.hindsight(im.Since - c.before),
		Raised: v.minute, Confidence: confidence(im.Score.Float() / 2), Evidence: c.evidence})
	if e != nil {
		w.slow.Episode = e.ID
		im.Model = c.model
	}
}

// renameImbalance lets the episode follow what has become the likeliest cause. With another instrument it counts as raised anew:
// what was said before was something else.
func (w *Watcher) renameImbalance(open int, v *view) {
	im := &w.slow.Imbalance
	c := im.classify(w, v)
	e := &w.open[open]
	if e.Instrument != c.instrument {
		if c.lead < 3 {
			return
		}
		e.Raised = v.minute
	}
	if e.Kind != c.kind || e.Instrument != c.instrument {
		e.Kind, e.Instrument, e.Advice = c.kind, c.instrument, c.kind.Entry().Advice
		e.From = min(e.From, w.hindsight(im.Since-c.before))
		e.Rev++
	}
	if e.Severity == rules.Watch && im.severity(c, v) == rules.Act {
		e.Severity, e.Raised = rules.Act, v.minute
		e.Rev++
	}
	e.Also, e.Evidence = c.also, c.evidence
	im.Model = c.model
}

// severity says whether somebody should act: a few percent are watched until they have lasted for days.
func (im *imbalance) severity(c cause, v *view) rules.Severity {
	if c.kind == rules.DomeSnow || c.kind == rules.DomeWet {
		return rules.Act // they are large
	}
	a, b := c.model.A.Float(), c.model.B.Float()
	size := math.Abs(a)
	if c.model.K == 3 {
		size = math.Sqrt(float64(a*a)+float64(b*b)) * leverAt60
	}
	days, needed := float64(v.minute-im.Since)/1440, float64(smallDays)
	if c.kind != rules.DomeSoiled { // what has been seen to grow is no chance
		needed *= smallDeviation * smallDeviation / float64(size*size)
	}
	if size < smallDeviation && days < needed {
		return rules.Watch
	}
	return rules.Act
}

// A deviation below smallDeviation must have lasted for smallDays, half of it four times as long: what changes from day to day at a sound
// station averages out as the square root of the days.
const (
	smallDeviation = 0.04
	smallDays      = 2
	leverAt60      = 1.73 // of a tilt on the beam with the sun 60 degrees from the zenith: its tangent
)
