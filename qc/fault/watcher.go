package fault

import (
	"fmt"
	"hash/fnv"
	"slices"

	"fluxwarden/qc/sky"
	"fluxwarden/rules"
)

// A Watcher holds, for one station and one day, how strongly each kind of fault is suspected of each instrument, and turns
// suspicions that cross the odds into episodes.
type Watcher struct {
	setup          *Setup
	day            int64
	base           Baseline
	facts          gatherFacts
	cases          [caseCount]suspicion
	open           []Episode
	closed         []Episode       // on this day
	last           int64           // the last minute with a record; noMinute before the first
	now            *view           // the minute in hand, one of ring
	ring           [ringViews]view // the last minutes
	head           int             // where now stands in it
	byDay, byNight caseList        // the cases that the station can have
	slow           SlowCarry
	sunrise        int64
	noted          []int       // notes of the setup's book that matter today
	taught         []KindFacts // by the days before, ascending
	kinds          KindCarry
	touch          touch
	cloudless      Cloudless
	cleanest       *sky.Table // at the least load of the band; nil until it is asked for
}

const noMinute = int64(-1) << 40

// A Carry is what a day hands on to the next, quantised.
type Carry struct {
	LastRecord int64         `json:"last_record"`
	Cases      []CarriedCase `json:"cases,omitempty"`
	Open       []Episode     `json:"open,omitempty"`
	Runs       []RunState    `json:"runs,omitempty"`
	Slow       SlowCarry     `json:"slow"`
	Kinds      KindCarry     `json:"kinds"`
}

// A CarriedCase is one suspicion that is not at rest.
type CarriedCase struct {
	Case  int    `json:"case"`
	Score Number `json:"score"`
	Since int64  `json:"since"`
	Last  int64  `json:"last"`
	For   int    `json:"for"`
	Sum   Number `json:"sum"`
}

// NewWatcher starts a day from what the days before have taught (facts, ascending, at most thirty days old) and what the last
// of them carried over; carry is nil before the first day.
func NewWatcher(setup *Setup, day int64, facts []DayFacts, carry *Carry) *Watcher {
	w := &Watcher{setup: setup, day: day, last: noMinute}
	w.base = learn(setup, day, facts)
	w.cloudless = NewCloudless(setup, day, w.base.sky)
	for i := range facts {
		w.taught = append(w.taught, facts[i].Kinds)
	}
	w.facts.reset(w)
	w.slow.forgetWeather()
	for i := range w.cases {
		w.cases[i].Since = noMinute
	}
	if carry != nil {
		w.last = carry.LastRecord
		w.open = slices.Clone(carry.Open)
		for _, c := range carry.Cases {
			if c.Case < len(w.cases) {
				w.cases[c.Case] = suspicion{Score: c.Score.Float(), Since: c.Since, Last: c.Last, For: c.For, Sum: c.Sum.Float()}
			}
		}
		w.slow = carry.Slow.clone()
		w.kinds = carry.Kinds.clone()
	}
	for i := range w.ring {
		w.ring[i].forget()
	}
	w.now = &w.ring[0]
	w.listCases()
	w.takeNotes()
	return w
}

// Minute takes one minute into account. It fills m.Clear.
func (w *Watcher) Minute(m *Minute) {
	w.Tick(m.Minute)
	if m.Records > 0 {
		w.closeGap(m.Minute)
		if w.last != noMinute && w.setup.Notes != nil {
			w.endByNotes(m.Minute)
		}
		if hole := m.Minute - w.last - 1; w.last != noMinute && hole > 0 {
			w.seeHole(hole, m.Minute-hole)
		}
		w.last = m.Minute
	}
	w.head = (w.head + 1) % ringViews
	w.now = &w.ring[w.head]
	w.now.look(w, m)
	if m.Records == 0 {
		return
	}
	list := &w.byDay
	if w.now.night {
		list = &w.byNight
	}
	for _, i := range list.cases[:list.n] {
		c := &catalogueOfCases[i]
		if w.now.isSilent(c) {
			continue
		}
		w.step(int(i), c, c.evidence(w, c, w.now))
	}
	w.watchSlow(w.now)
	w.watchTouch(w.now)
	w.watchRepairs(w.now)
	w.facts.minute(w, w.now)
}

// ringViews holds the minute in hand and historyViews before it; a power of two.
const ringViews = 8

// prev is the view of k+1 minutes ago.
func (w *Watcher) prev(k int) *view { return &w.ring[(w.head-1-k+ringViews)%ringViews] }

// A caseList names cases by their place in the catalogue.
type caseList struct {
	cases [caseCount]uint8
	n     int
}

func (l *caseList) add(i int) {
	l.cases[l.n] = uint8(i)
	l.n++
}

// listCases finds the cases that the station has the instruments for, and those of them that a night can tell anything of.
func (w *Watcher) listCases() {
	for i := range catalogueOfCases {
		c := &catalogueOfCases[i]
		if !w.applies(c) {
			continue
		}
		w.byDay.add(i)
		if !onlyBySun.Has(c.kind) {
			w.byNight.add(i)
		}
	}
}

// Tick says that nothing more will come before the minute.
func (w *Watcher) Tick(minuteUTC int64) {
	if w.last == noMinute {
		return
	}
	if heard := w.heard(); minuteUTC-heard > w.setup.GapMinutes {
		w.seeGap(heard)
	}
}

// EndDay closes the day and gives what later days may know of it.
func (w *Watcher) EndDay() (DayFacts, Carry) {
	facts := w.facts.close(w)
	w.endKinds(&facts)
	c := Carry{LastRecord: w.last, Open: slices.Clone(w.open), Slow: w.slow.clone(), Kinds: w.kinds.clone()}
	for i := range w.cases {
		if s := &w.cases[i]; s.Score > 0 || s.Since != noMinute {
			c.Cases = append(c.Cases, CarriedCase{Case: i, Score: quantise(s.Score), Since: s.Since, Last: s.Last, For: s.For, Sum: quantise(s.Sum)})
		}
	}
	return facts, c
}

// Episodes lists the open ones and those that ended today, by the minute they were raised.
func (w *Watcher) Episodes() []Episode {
	all := append(slices.Clone(w.closed), w.open...)
	slices.SortStableFunc(all, func(a, b Episode) int {
		if a.Raised != b.Raised {
			return int(a.Raised - b.Raised)
		}
		if a.ID < b.ID {
			return -1
		}
		return 1
	})
	return all
}

// raise opens an episode unless an open one of the same instrument and kind is there already or one that explains it.
func (w *Watcher) raise(e Episode) *Episode {
	for i := range w.open {
		o := &w.open[i]
		if o.Instrument == e.Instrument && o.Kind == e.Kind || explains(o, &e) && (o.Instrument == e.Instrument || w.isShortwave(o.Instrument)) {
			return nil
		}
	}
	if again := w.reopen(&e); again != nil {
		return again
	}
	e.Station, e.To, e.Rev = w.setup.Station, Open, 1
	e.ID = episodeID(&e)
	if e.Advice == "" {
		e.Advice = e.Kind.Entry().Advice
	}
	e.Confidence = float64(quantise(e.Confidence))
	w.againAfterCheck(&e)
	w.open = append(w.open, e)
	return &w.open[len(w.open)-1]
}

// reopenMinutes is within how long the same fault of the same instrument is the same episode that had seemed to be over.
const reopenMinutes = 240

// reopen takes back the end of an episode that has turned out not to be over; nil if there is none.
//
// Only what rests on how the three close can seem to be over: a signal that came back, or a record, did come back.
func (w *Watcher) reopen(e *Episode) *Episode {
	if !restsOnClosing.Has(e.Kind) || e.Kind == rules.SignalLost {
		return nil
	}
	for i := range w.closed {
		o := w.closed[i]
		if o.Instrument == e.Instrument && o.Kind == e.Kind && o.Severity == e.Severity && e.Raised-o.To < reopenMinutes {
			o.To, o.Evidence, o.Also = Open, e.Evidence, e.Also
			o.From = min(o.From, e.From)
			o.Rev++
			w.closed = slices.Delete(w.closed, i, i+1)
			w.kinds.Checks = slices.DeleteFunc(w.kinds.Checks, func(c Check) bool { return c.Episode == o.ID })
			w.open = append(w.open, o)
			return &w.open[len(w.open)-1]
		}
	}
	return nil
}

// finish closes the open episode i with the first minute that is sound again.
func (w *Watcher) finish(i int, to int64) {
	e := w.open[i]
	e.To = max(to, e.From+1)
	e.Rev++
	w.open = slices.Delete(w.open, i, i+1)
	w.closed = append(w.closed, e)
	w.beginCheck(&e)
}

func (w *Watcher) openIndex(instrument string, kind rules.FaultKind) int {
	for i := range w.open {
		if w.open[i].Instrument == instrument && w.open[i].Kind == kind {
			return i
		}
	}
	return -1
}

// episodeID names an episode for good: by station, instrument, the kind it was raised as and the minute it was raised.
func episodeID(e *Episode) string {
	h := fnv.New64a()
	fmt.Fprintf(h, "%s|%s|%s|%d", e.Station, e.Instrument, e.Kind, e.Raised)
	return fmt.Sprintf("%016x", h.Sum64())
}

// quantise rounds what is carried over midnight, so that a state read back is the state that was written.
func quantise(v float64) Number { return Number(roundTo(v, 4096)) }
