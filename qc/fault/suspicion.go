package fault

import (
	"math"

	"fluxwarden/rules"
)

// A suspicion is how strongly one kind of fault is suspected of one instrument: a running sum of log odds that cannot fall
// below nothing (Page 1954, Biometrika 41, 100: the cumulative-sum test), so that its last rise from nothing is the likeliest
// beginning.
type suspicion struct {
	Score float64 // log odds against being sound, 0..cap
	Since int64   // the minute at which the present rise began; noMinute at rest
	Last  int64   // the last minute that spoke for it
	For   int     // minutes that spoke for it since then
	Sum   float64 // of the evidence number of those minutes
}

// mean is the evidence number's mean over the minutes that spoke for it.
func (s *suspicion) mean() float64 {
	if s.For == 0 {
		return math.NaN()
	}
	return s.Sum / float64(s.For)
}

// A hint is what one minute says of one case: its log odds, and a number for the technician.
type hint struct{ odds, number float64 }

var nothing = hint{}

// A faultCase is one kind of fault on one instrument as it can be told from single minutes.
type faultCase struct {
	index      int // in catalogueOfCases
	kind       rules.FaultKind
	quantity   rules.Quantity // whose primary instrument is suspected
	instrument string         // Tracker or Logger instead of the instrument; empty otherwise
	needs      []rules.Quantity
	fan        bool    // the speed of the instrument's fan is needed
	raise      float64 // odds at which it is raised
	most       float64 // where the score stops growing: how much it takes to end the episode
	quiet      int64   // minutes without a word for it after which an open episode is let go; 0 is never
	evidence   func(w *Watcher, c *faultCase, v *view) hint
	number     string // name and unit of the hint's number
	unit       string
}

// applies says whether the station has what the case needs.
func (w *Watcher) applies(c *faultCase) bool {
	if !w.setup.Instruments[c.quantity].Present {
		return false
	}
	if c.fan && !w.setup.Instruments[c.quantity].HasFan {
		return false
	}
	for _, q := range c.needs {
		if int(q) < rules.RadiationCount && !w.setup.Instruments[q].Present {
			return false
		}
	}
	return true
}

func (c *faultCase) of(s *Setup) string {
	if c.instrument != "" {
		return c.instrument
	}
	return s.Instruments[c.quantity].ID
}

// step takes one minute's hint into case i and raises or ends its episode.
func (w *Watcher) step(i int, c *faultCase, h hint) {
	s := &w.cases[i]
	if h.odds > 0 && restsOnClosing.Has(c.kind) && !math.IsNaN(w.now.value[c.quantity]) && w.upsetBy(c) {
		return // the open episode accounts for it
	}
	if h.odds > 0 && w.explainedBy(c) {
		return
	}
	switch {
	case h.odds > 0:
		if s.Score <= 0 && s.Since == noMinute {
			*s = suspicion{Since: w.now.minute}
		}
		s.Score = min(c.most, s.Score+h.odds)
		s.Last = w.now.minute
		s.For++
		s.Sum += h.number
	case h.odds < 0 && s.Since != noMinute:
		s.Score = max(0, s.Score+h.odds)
	case c.quiet > 0 && s.Since != noMinute && w.now.minute-s.Last > c.quiet:
		s.Score = 0
	default:
		return
	}
	open := w.openIndex(c.of(w.setup), c.kind)
	if open >= 0 {
		if s.For <= evidenceSettles {
			w.open[open].Evidence = w.evidenceOf(c, s)
		}
		if s.Score <= 0 {
			if w.open[open].ID == w.slow.Episode {
				w.slow.Episode, w.slow.Imbalance = "", imbalance{}
			}
			w.finish(open, s.Last+1)
		}
	}
	if s.Score <= 0 {
		if c.kind == rules.PointingLost {
			w.kinds.BeamLow = mean{}
		}
		*s = suspicion{Since: noMinute}
		return
	}
	if open < 0 && s.Score >= c.raise {
		if c.kind == rules.Noise && (w.now.minute-s.Since <= touchLongest || h.odds <= 0) {
			return // it may be somebody at the dome
		}
		if w.imbalanceEpisode() >= 0 && c.kind == rules.ZeroOffset {
			w.becomeZeroOffset(c, s)
			return
		}
		if k := w.openIndex(c.of(w.setup), rules.RangeClipped); k >= 0 && c.kind == rules.SignalFrozen {
			e := &w.open[k] // what seemed clipped has stood still where it should have fallen
			e.Kind, e.Advice, e.Evidence = c.kind, c.kind.Entry().Advice, w.evidenceOf(c, s)
			e.From = min(e.From, w.hindsight(s.Since))
			e.Rev++
			return
		}
		w.raise(Episode{Instrument: c.of(w.setup), Kind: c.kind, Severity: rules.Act, From: w.hindsight(s.Since), Raised: w.now.minute,
			Confidence: confidence(s.Score), Evidence: w.evidenceOf(c, s)})
	}
}

// explainedBy says whether an open episode of another kind on the same instrument accounts for what the case would say.
func (w *Watcher) explainedBy(c *faultCase) bool {
	for i := range w.open {
		e := &w.open[i]
		if e.Severity != rules.Act || e.Instrument != c.of(w.setup) || e.Kind == c.kind || accountsForNothing.Has(e.Kind) {
			continue
		}
		if e.Kind == rules.RangeClipped && c.kind == rules.SignalFrozen || e.ID == w.slow.Episode {
			continue // it may turn out to be this
		}
		return true
	}
	return false
}

// upsetBy says whether an open episode of another cause upsets how global, direct and diffuse close.
func (w *Watcher) upsetBy(c *faultCase) bool {
	for i := range w.open {
		e := &w.open[i]
		if e.Severity == rules.Act && upsetsClosing.Has(e.Kind) && (e.Kind != c.kind || e.Instrument != c.of(w.setup)) && w.isShortwave(e.Instrument) {
			return true
		}
	}
	return false
}

// hindsight bounds how far back an episode may reach.
func (w *Watcher) hindsight(since int64) int64 {
	return max(since, w.now.minute-hindsightMinutes)
}

// evidenceSettles is after how many minutes the numbers of an episode stand: values are restored by some of them, and days long past must
// not change with every new night.
const evidenceSettles = 300

const hindsightMinutes = 10 * 1440

func (w *Watcher) evidenceOf(c *faultCase, s *suspicion) []Evidence {
	out := []Evidence{{"minutes", float64(s.For), "min"}}
	if c.kind == rules.PointingLost && w.kinds.BeamLow.N > s.For/2 {
		out = append(out, Evidence{"beam_low", roundTo(100*w.kinds.BeamLow.of(), 1), "%"})
	}
	if c.number != "" {
		out = append(out, Evidence{c.number, roundTo(s.mean(), 1000), c.unit})
	}
	return out
}

// confidence turns log odds into a probability with even prior odds.
func confidence(odds float64) float64 {
	p := 1 - 1/(1+expOf(odds))
	return roundTo(min(p, 0.999), 1000)
}

func roundTo(v, per float64) float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return 0
	}
	return math.RoundToEven(v*per) / per
}
