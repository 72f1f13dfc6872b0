// Package fault says which instrument is at fault, with what, since when. It is pure.
package fault

import "fluxwarden/rules"

// An Episode is one fault from its beginning to its end. Times are UTC minutes since 1970.
type Episode struct {
	ID         string // stable through all revisions of the episode
	Rev        int    // counts, in a run in order, how often the episode was changed after it was raised
	Station    string
	Instrument string // of the site file, or Tracker or Logger
	Kind       rules.FaultKind
	Also       []rules.FaultKind // what the evidence cannot yet tell it from; one at most
	Severity   rules.Severity
	From       int64   // first minute it spoils; may use hindsight
	To         int64   // first minute that is sound again; Open while it lasts
	Raised     int64   // the minute at which a run in order crossed the odds
	Confidence float64 // 0..1
	Evidence   []Evidence
	Advice     string
}

// Open stands in Episode.To while the fault lasts.
const Open = int64(1) << 62

// Names that stand in Episode.Instrument for what is not an instrument.
const (
	Tracker = "tracker"
	Logger  = "logger"
)

// Evidence is one number that a technician can check.
type Evidence struct {
	Name  string
	Value float64
	Unit  string
}

// Covers says whether the episode spoils the minute.
func (e *Episode) Covers(minute int64) bool { return minute >= e.From && minute < e.To }
