package fault

import (
	"math"
	"slices"

	"fluxwarden/qc/exact"
	"fluxwarden/rules"
)

// A jump is a sudden change of the logger's clock that the stamps themselves show: set forward it leaves a hole, set back it writes
// stamps twice. The sun tells whether the clock was wrong afterwards.
type jump struct {
	Shift int64  `json:"shift"` // minutes that the stamps are ahead of the time since then, if the clock was right before
	At    int64  `json:"at"`
	Score Number `json:"score"`
	For   int    `json:"for"`
	Last  int64  `json:"last"`
	// Against counts the sunlit minutes since then that fit the stamps as they are: enough of them, and the clock never jumped
	Against int `json:"against"`
	// Fine weighs the shift by the minutes whose deviation it would change by less than a sound instrument may err
	Fine fineShift `json:"fine"`
}

const (
	jumpsMost     = 4
	jumpLeast     = 2   // minutes
	jumpGreatest  = 200 // minutes
	jumpRaise     = 4.0
	jumpMost      = 10.0
	jumpDaysWatch = 10
	jumpAgainst   = 30   // sunlit minutes that acquit the clock
	jumpAcquits   = -3.0 // log odds of the fine minutes that do so too
)

// seeHole notes that no record came for some minutes.
func (w *Watcher) seeHole(minutes, at int64) { w.addJump(jump{Shift: minutes, At: at}) }

// watchConflicts notes a run of stamps that came twice.
func (w *Watcher) watchConflicts(v *view) {
	if v.conflict {
		if w.slow.Conflicts == 0 {
			w.slow.ConflictAt = v.minute
		}
		w.slow.Conflicts++
		return
	}
	if w.slow.Conflicts > 0 {
		w.addJump(jump{Shift: -w.slow.Conflicts, At: w.slow.ConflictAt})
		w.slow.Conflicts = 0
	}
}

func (w *Watcher) addJump(j jump) {
	if n := max(j.Shift, -j.Shift); n < jumpLeast || n > jumpGreatest {
		return
	}
	w.slow.Jumps = slices.DeleteFunc(w.slow.Jumps, func(o jump) bool {
		return o.Score <= 0 && (j.At-o.At > jumpDaysWatch*1440 || o.Against > 5 && j.At-o.At > 3*1440) && !w.clockOpen(o)
	})
	if w.putRight(j) {
		return
	}
	if len(w.slow.Jumps) >= jumpsMost {
		for i := range w.slow.Jumps {
			if w.slow.Jumps[i].Score <= 0 {
				w.slow.Jumps = slices.Delete(w.slow.Jumps, i, i+1)
				break
			}
		}
	}
	if len(w.slow.Jumps) < jumpsMost {
		w.slow.Jumps = append(w.slow.Jumps, j)
	}
}

// putRight ends the open episode if the jump takes back the shift that it names, or forgets one that was only suspected: somebody has
// set the clock.
func (w *Watcher) putRight(j jump) bool {
	for _, open := range [...]bool{true, false} {
		for i, o := range w.slow.Jumps {
			d := o.Shift + j.Shift
			if d < -1 || d > 1 || w.clockOpen(o) != open || !open && (j.At-o.At >= jumpDaysWatch*1440 || o.odds() <= 0) {
				continue
			}
			if open {
				w.finish(w.openIndex(Logger, rules.ClockShift), j.At)
			}
			w.slow.Jumps = slices.Delete(w.slow.Jumps, i, i+1)
			return true
		}
	}
	return false
}

func (w *Watcher) clockOpen(j jump) bool {
	i := w.openIndex(Logger, rules.ClockShift)
	return i >= 0 && w.open[i].From == j.At
}

// clockSuspected says whether a jump is likelier than not to have set the clock wrong.
func (w *Watcher) clockSuspected() bool {
	for i := range w.slow.Jumps {
		if w.slow.Jumps[i].odds() > 0 {
			return true
		}
	}
	return false
}

// odds are the log odds of the shift so far.
func (j *jump) odds() float64 {
	return j.Score.Float() + max(-jumpMost, min(jumpMost, j.Fine.odds(j.Shift)))
}

// watchClock holds global against its partners with the sun where the stamp says and where a clock that jumped would have it.
func (w *Watcher) watchClock(v *view) {
	if len(w.slow.Jumps) == 0 || !v.sunUp || !v.steady {
		return
	}
	g, b, d := v.g(), v.b(), v.d()
	if math.IsNaN(g+b+d) || b < 150 {
		return
	}
	if i := w.imbalanceEpisode(); w.otherCause() && w.openIndex(Logger, rules.ClockShift) < 0 || i >= 0 && w.slow.Imbalance.Since-w.slow.Jumps[len(w.slow.Jumps)-1].At > 3*1440 {
		return
	}
	c := w.base.closureAt(v)
	asStamped := math.Abs(g - v.sum)
	sigma := 4 + float64(0.012*v.sum)
	for i := range w.slow.Jumps {
		j := &w.slow.Jumps[i]
		then := max(0, w.muMinutesAgo(v, j.Shift))
		shifted := math.Abs(g - float64(c*(float64(b*then)+d)))
		odds := jumpOdds(asStamped, shifted, sigma, w.clockOpen(*j))
		if odds == 0 && asStamped < 2.5*sigma && shifted < 2.5*sigma {
			if !w.base.bySector[sectorOf(v)] {
				continue // how the three stand to each other with the sun there is not known well enough
			}
			j.Fine.add(v.azimuthDeg > 180, float64(c*b)*(then-v.mu)/v.sum, g/v.sum-1, w.fineScatter(v))
			if j.Fine.minutes()%fineEvery == 0 {
				w.clockEpisode(v, j)
			}
			continue
		}
		if odds < -0.03 && asStamped < 2*sigma {
			j.Against++
		}
		if odds == 0 {
			continue
		}
		j.Score = Number(max(0, min(jumpMost, j.Score.Float()+odds)))
		if odds > 0 {
			j.For++
			j.Last = v.minute
		}
		w.clockEpisode(v, j)
	}
	w.slow.Jumps = slices.DeleteFunc(w.slow.Jumps, func(j jump) bool {
		return (j.Against >= jumpAgainst || j.Fine.odds(j.Shift) < jumpAcquits) && j.Score <= 0 && !w.clockOpen(j)
	})
}

// jumpOdds are the log odds that one steady minute gives for a shift: two normal errors of the same scatter, of which some minutes
// scatter together and count once. Where neither time fits, something else is wrong and it says nothing for the shift; against one that
// is only a guess it counts all the same.
func jumpOdds(asStamped, shifted, sigma float64, open bool) float64 {
	if math.Abs(asStamped-shifted) < 1.2*sigma {
		return 0 // the two differ by less than the directional error of a sound instrument
	}
	odds := (float64(asStamped*asStamped) - float64(shifted*shifted)) / float64(2*sigma*sigma*closureTogether)
	switch {
	case shifted > 2.5*sigma && asStamped > 2.5*sigma:
		if open {
			return 0
		}
		return -0.1
	case odds > 0:
		return min(0.2, odds)
	}
	return max(-0.2, odds)
}

// likelierJump says whether another jump by about the same shift is likelier: two holes of a length differ by what lies between them.
func (w *Watcher) likelierJump(j *jump) bool {
	for i := range w.slow.Jumps {
		o := &w.slow.Jumps[i]
		if d := o.Shift - j.Shift; o.At != j.At && d >= -1 && d <= 1 && o.Score.Float()-j.Score.Float()+o.Fine.sooner(&j.Fine) > 0 {
			return true
		}
	}
	return false
}

func (w *Watcher) clockEpisode(v *view, j *jump) {
	open := w.openIndex(Logger, rules.ClockShift)
	odds := j.odds()
	evidence := []Evidence{{"shift", float64(j.Shift), "min"}, {"minutes", float64(j.For + j.Fine.minutes()), "min"}}
	if open < 0 && w.likelierJump(j) {
		return
	}
	switch {
	case open < 0 && odds >= jumpRaise && w.imbalanceEpisode() >= 0:
		// what seemed an instrument's was the clock's
		e := &w.open[w.imbalanceEpisode()]
		e.Instrument, e.Kind, e.Also, e.Advice = Logger, rules.ClockShift, nil, rules.ClockShift.Entry().Advice
		e.From, e.Raised, e.Evidence = w.hindsight(j.At), v.minute, evidence
		e.Rev++
		w.slow.Episode, w.slow.Imbalance = "", imbalance{}
	case open < 0 && odds >= jumpRaise:
		w.raise(Episode{Instrument: Logger, Kind: rules.ClockShift, Severity: rules.Act, From: w.hindsight(j.At), Raised: v.minute,
			Confidence: confidence(2 * odds), Evidence: evidence})
	case open >= 0 && w.open[open].From == j.At:
		w.open[open].Evidence = evidence
		if odds <= 0 {
			w.finish(open, j.Last+1)
		}
	}
}

// muMinutesAgo is the cosine of the zenith angle with the sun where it stood some minutes before: the hour angle turns by a quarter
// of a degree a minute, the declination stays.
func (w *Watcher) muMinutesAgo(v *view, minutes int64) float64 {
	sinPhi, cosPhi := sinDeg(w.setup.LatitudeDeg), cosDeg(w.setup.LatitudeDeg)
	sinZ := math.Sqrt(max(0, 1-float64(v.mu*v.mu)))
	sinA, cosA := sinDeg(v.azimuthDeg), cosDeg(v.azimuthDeg)
	sinDelta := float64(sinPhi*v.mu) + float64(cosPhi*sinZ*cosA)
	cosDelta := math.Sqrt(max(1e-12, 1-float64(sinDelta*sinDelta)))
	sinH := -sinZ * sinA / cosDelta
	cosH := (v.mu - float64(sinPhi*sinDelta)) / (cosPhi * cosDelta)
	h := exact.Atan2(sinH, cosH) - float64(float64(minutes)*(math.Pi/720))
	return float64(sinPhi*sinDelta) + float64(cosPhi*cosDelta*exact.Cos(h))
}
