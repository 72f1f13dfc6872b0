package limit

import (
	"math"

	"fluxwarden/rules"
)

// A Run counts for how many minutes on end a series has said the very same.
type Run struct {
	Value float64
	Count int
}

// Next takes one more minute into the run; an absent one ends it.
func (r *Run) Next(v float64) {
	switch {
	case math.IsNaN(v):
		*r = Run{Value: v}
	case v == r.Value:
		r.Count++
	default:
		*r = Run{Value: v, Count: 1}
	}
}

// Stuck tests that a series still moves: it misses once the run is as long as the limit for day or night. Own choice of
// lengths: a thermopile under any sky moves within minutes by more than a logger resolves, while at night a coarse logger
// may stand still for hours. A shortwave value of about nothing says nothing either way: loggers that write no negative values stand at 0.0
// all winter night and under thick cloud; a signal that is lost is told by its partners.
func Stuck(r *Run, q rules.Quantity, s *Sun, l *rules.Limits) rules.Outcome {
	if math.IsNaN(r.Value) {
		return rules.NoValue
	}
	most := l.StuckMinutes
	if q.Shortwave() {
		if math.Abs(r.Value) < NearNothingWm2 {
			return rules.TooSmall
		}
		if s.ZenithDeg > HorizonZenithDeg {
			most = l.StuckNightMinutes
		}
	}
	if float64(r.Count) >= most {
		return rules.Miss
	}
	return rules.Pass
}

const (
	// HorizonZenithDeg is where the day's last light has no measure any more.
	HorizonZenithDeg = 90
	// NearNothingWm2 is what a shaded or dark shortwave instrument may stand at for hours.
	NearNothingWm2 = 15
)
