package fault

import (
	"cmp"
	"math"
	"slices"

	"fluxwarden/qc/exact"
	"fluxwarden/rules"
)

// A cause is one explanation of an imbalance.
type cause struct {
	kind       rules.FaultKind
	instrument string
	also       []rules.FaultKind
	evidence   []Evidence
	misfit     float64 // chi squared with its prior: the less the likelier
	lead       float64 // by which it is likelier than the next of another instrument
	model      model
	before     int64 // minutes by which it began before the imbalance did
}

// Scatter of what the fits are held against (own choice, from the robust scatter of measured months).
const (
	closureScatter  = 0.015 // of a steady minute's closure
	closureTogether = 15    // minutes that scatter together and count once
	dullScatter     = 0.01  // of global over diffuse under thick cloud, a day
	globalScatter   = 0.03  // of global over the learnt clear sky
	beamScatter     = 0.08  // of the beam over the learnt clear sky
	wanders         = 0.25  // of a deviation, by which it wanders
	leanMost        = 6.0   // degrees that an instrument on its feet can well be out of level
)

// classify names the likeliest cause of the imbalance so far.
func (im *imbalance) classify(w *Watcher, v *view) cause {
	s := w.setup
	g, p, d := s.Instruments[rules.Global].ID, s.Instruments[rules.Direct].ID, s.Instruments[rules.Diffuse].ID
	gainG, fitG := im.fitOne(0)
	gainP, fitP := im.fitOne(1)
	tiltE, tiltN, fitT := im.fitTilt()
	if lean := math.Sqrt(float64(tiltE*tiltE)+float64(tiltN*tiltN)) * 180 / math.Pi; lean > leanMost {
		fitT += float64((lean - leanMost) * (lean - leanMost))
	}
	gainD, fitD := im.fitDiffuse()
	if im.Sums.XX[0][0] <= 0 && im.Dull.N >= 20 { // no beam so far
		gainG, gainD = im.Dull.of(), -im.Dull.of()
	}
	fitG += absurd(1 + gainG)
	fitD += absurd(1 / (1 - gainD))
	beamCause := cause{kind: rules.SensitivityWrong, instrument: p, model: model{1, Number(gainP), 0}, misfit: fitP + absurd(1/(1+gainP)) + im.elsewhere(0, 0, -gainP),
		evidence: []Evidence{{"gain", roundTo(1/(1+gainP), 1000), "1"}}}
	if gainP < -0.15 && im.Sky[2].N >= 20 && im.Sky[2].of() > 0.5 {
		// a share of the beam on diffuse closes like a beam read too high, but the beam is as it should be and diffuse is not
		beamCause = cause{kind: rules.ShadeOff, instrument: d, model: model{1, Number(gainP), 0}, misfit: fitP + im.elsewhere(0, 0, 0),
			evidence: []Evidence{{"share_of_beam_on_diffuse", roundTo(-gainP, 100), "1"}}}
	}
	list := []cause{
		{kind: rules.SensitivityWrong, instrument: g, model: model{0, Number(gainG), 0}, misfit: fitG + im.elsewhere(gainG, gainG, 0),
			evidence: []Evidence{{"gain", roundTo(1+gainG, 1000), "1"}}},
		beamCause,
		{kind: rules.SensitivityWrong, instrument: d, model: model{2, Number(gainD), 0}, misfit: fitD + im.elsewhere(-gainD, 0, 0) + 3,
			evidence: []Evidence{{"gain", roundTo(1/(1-gainD), 1000), "1"}}},
		{kind: rules.SensorTilted, instrument: g, model: model{3, Number(tiltE), Number(tiltN)}, misfit: fitT + im.elsewhere(0, im.Recent.Float(), 0) + 2,
			evidence: []Evidence{{"tilt", roundTo(math.Sqrt(float64(tiltE*tiltE)+float64(tiltN*tiltN))*180/math.Pi, 10), "degrees"},
				{"towards", roundTo(bearing(tiltE, tiltN), 1), "degrees"}}},
	}
	slices.SortStableFunc(list, func(a, b cause) int { return cmp.Compare(a.misfit, b.misfit) })
	best := list[0]
	if second := list[1]; second.misfit-best.misfit < 4 && second.instrument == best.instrument && second.kind != best.kind {
		best.also = []rules.FaultKind{second.kind}
	}
	best.lead = math.Inf(1)
	for _, c := range list[1:] {
		if c.instrument != best.instrument {
			best.lead = c.misfit - best.misfit
			break
		}
	}
	best = im.weather(best, s, v)
	days, grew := im.grewBefore(w)
	if best.kind == rules.SensitivityWrong && best.loss() && (grew || im.grows()) {
		if grew {
			best.before = int64(days-1) * 1440
		}
		best.kind, best.also = rules.DomeSoiled, []rules.FaultKind{rules.SensitivityDrift}
	}
	best.evidence = append(best.evidence, Evidence{"closure_off", roundTo(100*im.Recent.Float(), 10), "%"}, Evidence{"minutes", float64(im.N), "min"})
	return best
}

// weather turns a gain into dew, frost or snow where the hour and the air speak for it. Dew and frost come with the hours after a humid or
// freezing night, on the dome of global or the window of the pyrheliometer; snow with frost, on any dome, and lies for a day or two. Both are
// large: a coefficient seldom slips by so much at such an hour.
func (im *imbalance) weather(c cause, s *Setup, v *view) cause {
	if c.kind != rules.SensitivityWrong {
		if c.instrument != s.Instruments[rules.Global].ID || c.kind == rules.ShadeOff {
			return c
		}
	}
	global, beam := c.instrument == s.Instruments[rules.Global].ID, c.model.K == 1
	lasted, dewy := v.minute-im.Since, im.dewy(v)
	switch {
	case beam && c.loss() && dewy:
		c.kind, c.also = rules.DomeWet, []rules.FaultKind{rules.SensitivityWrong}
	case im.Coldest < snowAirC && lasted < 48*60 && im.snowLies(&c):
		// the beam's own gain is no part of it
		c.kind, c.also, c.instrument = rules.DomeSnow, []rules.FaultKind{rules.DomeWet}, s.Instruments[rules.Global].ID
		if im.Recent < 0 || !dewy {
			c.lead = math.Inf(1) // the other way a frosted window of the pyrheliometer looks the same
		}
		if global && dewy {
			c.kind = rules.DomeWet
		}
	case global && dewy:
		c.kind, c.also = rules.DomeWet, []rules.FaultKind{rules.SensitivityWrong}
	default:
		return c
	}
	if c.kind == rules.DomeWet && im.Coldest < snowAirC {
		c.also = []rules.FaultKind{rules.DomeSnow}
	}
	return c
}

// dewy says whether it is the hour for dew or frost, and the imbalance large enough for it.
func (im *imbalance) dewy(v *view) bool {
	return im.Since-im.Rise < 4*60 && v.minute-im.Since < 5*60 && im.DewGap <= dewGapMost && math.Abs(im.Recent.Float()) > 0.09
}

// snowLies says whether the imbalance is one that snow on the domes gives: global reads far too little, or diffuse does, or what would have to be
// a gain is none that an instrument has.
func (im *imbalance) snowLies(c *cause) bool {
	a, recent := c.model.A.Float(), im.Recent.Float()
	switch c.model.K {
	case 0:
		return min(a, recent) < -snowLeast || max(a, recent) > snowLeast && absurd(1+max(a, recent)) > 0
	case 3:
		return recent < -snowLeast
	case 2:
		return math.Abs(recent) > snowLeast
	}
	dull := im.Dull.N >= 20 && math.Abs(im.Dull.of()) > snowLeast // under thick cloud a gain of the beam does not show
	return math.Abs(recent) > snowLeast && (dull || absurd(1/(1+a)) > 0)
}

const (
	// snowAirC is below which air temperature of the hours before snow may have come to lie, degrees C (common practice).
	snowAirC = 2
	// snowLeast is the least deviation that is told as snow.
	snowLeast = 0.15
)

// dewGapMost is how far above its dew point the air may be for a dome that looks at a clear night sky to be wet, K (own choice: by so much does
// an unventilated one cool below the air).
const dewGapMost = 3

// dewPrior is by how many log odds dew in its hour is likelier beforehand than a slip of a coefficient in any (own choice: some
// threefold).
const dewPrior = 1

// grows says whether a loss has grown since it began, as dirt does and a coefficient does not.
func (im *imbalance) grows() bool {
	return im.N > 150 && im.Last-im.Since > 20*60 && math.Abs(im.Recent.Float()) > float64(1.3*math.Abs(im.First.of()))+0.008
}

// grewBefore says whether the days before it began stood off in the same way, the less the longer ago: a loss that grew from nothing within a
// week, against one that came at once. Both are held against the daily medians of closure, and of global over diffuse under thick cloud. It gives
// for how many days it had grown.
func (im *imbalance) grewBefore(w *Watcher) (days int, grew bool) {
	size := im.First.of()
	if im.First.N < 20 {
		size = im.Dull.of()
	}
	ago := w.day - im.Since/1440 // how many days ago it began
	atOnce, grown, n := 0.0, math.Inf(1), 0
	for lasting := 1; lasting <= 6; lasting++ {
		misfit := 0.0
		atOnce, n = 0, 0
		for k := 1; k <= 6; k++ { // days before it began
			i := int(ago) + k - 1
			if i >= latelyDays {
				break
			}
			want := max(0, size*float64(lasting-k)/float64(lasting))
			for _, series := range w.base.lately {
				if y := series[i]; !math.IsNaN(y) {
					misfit += float64((y - want) * (y - want))
					atOnce += float64(y * y)
					n++
				}
			}
		}
		if misfit < grown {
			grown, days = misfit, lasting
		}
	}
	return days, n >= 2 && (atOnce-grown)/(2*dailyScatter*dailyScatter) > grewOdds
}

const (
	dailyScatter = 0.008 // of a day's median closure (own choice, from measured months: 0.1 to 1.3 %)
	grewOdds     = 1.5
)

// absurd is the penalty of a gain that no slip of a coefficient gives: half and one and a half are far enough.
func absurd(gain float64) float64 {
	if gain > 0.6 && gain < 1.5 {
		return 0
	}
	return 20
}

// elsewhere is the misfit of what a cause implies under thick cloud, for global and for the beam over the clear sky.
func (im *imbalance) elsewhere(dull, global, beam float64) float64 {
	chi := 0.0
	add := func(m *mean, want, scatter float64, least int) {
		if m.N >= least && !math.IsNaN(want) {
			z := (m.of() - want) / scatter
			chi += min(float64(z*z), 25)
		}
	}
	add(&im.Dull, dull, dullScatter, 20)
	add(&im.Sky[0], global, globalScatter, 20)
	add(&im.Sky[1], beam, beamScatter, 20)
	return chi
}

// chi turns a sum of squares into chi squared. What is large wanders too, dew that dries or snow that slides, so the scatter grows
// with the deviation itself.
func (im *imbalance) chi(sse float64) float64 {
	variance := closureScatter * closureScatter
	if n := im.Sums.XX[0][0].Float(); n > 0 {
		variance += float64(wanders * wanders * im.Sums.YY.Float() / n)
	}
	return max(0, sse) / float64(variance*closureTogether)
}

// fitOne fits the deviation with one regressor.
func (im *imbalance) fitOne(k int) (coefficient, misfit float64) {
	xx, xy := im.Sums.XX[k][k].Float(), im.Sums.XY[k].Float()
	if xx <= 0 {
		return 0, im.chi(im.Sums.YY.Float())
	}
	c := xy / xx
	return c, im.chi(im.Sums.YY.Float() - float64(c*xy))
}

// fitDiffuse fits a gain of diffuse: deviation = -gain (1 - share).
func (im *imbalance) fitDiffuse() (gain, misfit float64) {
	s := &im.Sums
	xx := (s.XX[0][0] - Number(2*s.XX[0][1]) + s.XX[1][1]).Float()
	xy := (s.XY[1] - s.XY[0]).Float()
	if xx <= 0 {
		return 0, im.chi(s.YY.Float())
	}
	c := xy / xx
	return c, im.chi(s.YY.Float() - float64(c*xy))
}

// fitTilt fits a tilt of global, radians to the east and to the north.
func (im *imbalance) fitTilt() (east, north, misfit float64) {
	s := &im.Sums
	a, b, c := s.XX[2][2].Float(), s.XX[2][3].Float(), s.XX[3][3].Float()
	p, q := s.XY[2].Float(), s.XY[3].Float()
	ridge := float64(1e-3 * (a + c))
	a, c = a+ridge, c+ridge
	det := float64(a*c) - float64(b*b)
	if det <= 0 {
		return 0, 0, im.chi(s.YY.Float())
	}
	east = (float64(p*c) - float64(q*b)) / det
	north = (float64(q*a) - float64(p*b)) / det
	return east, north, im.chi(s.YY.Float() - float64(east*p) - float64(north*q))
}

// bearing is the azimuth that a tilt to the east and north leans towards, degrees.
func bearing(east, north float64) float64 {
	a := exact.Atan2(east, north) * 180 / math.Pi
	if a < 0 {
		a += 360
	}
	return a
}

func sinDeg(d float64) float64 { return exact.Sin(d * (math.Pi / 180)) }
func cosDeg(d float64) float64 { return exact.Cos(d * (math.Pi / 180)) }

// loss says whether the cause is a gain that is too low.
func (c *cause) loss() bool {
	a := c.model.A.Float()
	if c.model.K == 1 {
		return a > 0
	}
	return a < 0
}
