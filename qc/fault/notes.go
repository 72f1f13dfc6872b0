package fault

import (
	"math"

	"fluxwarden/rules"
)

// takeNotes finds the notes that matter on the day.
func (w *Watcher) takeNotes() {
	first := w.day * 1440
	// One minute before the day: what ends at midnight is taken in with the day's first record. A silence of some days hides none, since a
	// note that ended in it is found by endedSince.
	w.noted = w.setup.Notes.Reaching(first-1, first+1440)
}

// silence takes out of the minute the instruments that somebody is at work on, by the notes: their values are not there for the diagnosis,
// neither as evidence nor for learning. It says which; what a note of the whole station silences is everything.
func (w *Watcher) silence(v *view) {
	v.silent = [rules.RadiationCount]bool{}
	for _, i := range w.noted {
		n, span := w.setup.Notes.Note(i)
		if !n.Silences() || v.minute < span.From || v.minute >= span.To {
			continue
		}
		for q := range v.silent {
			if in := &w.setup.Instruments[q]; in.Present && n.Concerns(in.ID, rules.Quantity(q)) {
				v.silent[q] = true
				v.value[q], v.marked[q] = math.NaN(), false
				if rules.Quantity(q) == rules.LWDown {
					v.bodyC, v.net = math.NaN(), math.NaN()
				}
			}
		}
	}
}

// isSilent says whether a case can say nothing now, because somebody is at work on what it suspects.
func (v *view) isSilent(c *faultCase) bool { return v.silent[c.quantity] }

// endByNotes ends the episodes and suspicions that work has put an end to: those of which a note says that it was over after the last
// record before this one, and not after this one. What is left of the fault shows itself anew.
func (w *Watcher) endByNotes(now int64) {
	book := w.setup.Notes
	for i := range book.Len() {
		n, span := book.Note(i)
		if span.To <= w.last || span.To > now {
			continue
		}
		for k := 0; k < len(w.open); {
			if e := &w.open[k]; e.From < span.To && n.Ends(e.Kind) && w.noteConcerns(n, e.Instrument) {
				if e.ID == w.slow.Episode {
					w.slow.Episode, w.slow.Imbalance = "", imbalance{}
				}
				w.finish(k, min(span.From, now))
				w.noteCheck(n.ID)
				continue
			}
			k++
		}
		for k := range w.cases {
			c := &catalogueOfCases[k]
			if w.cases[k].Since != noMinute && n.Ends(c.kind) && w.noteConcerns(n, c.of(w.setup)) {
				w.cases[k] = suspicion{Since: noMinute}
			}
		}
	}
}

func (w *Watcher) noteConcerns(n *rules.Note, instrument string) bool {
	if n.Instrument == "" || n.Instrument == instrument {
		return true
	}
	for q := range w.setup.Instruments {
		if in := &w.setup.Instruments[q]; in.Present && in.ID == instrument {
			return n.Concerns(instrument, rules.Quantity(q))
		}
	}
	return false
}

// heard is the last minute at which the station was not simply silent: its last record, or the end of work on the station or its logger
// that began before the wait for the next record was over. A gap is counted from there.
func (w *Watcher) heard() int64 {
	last := w.last
	book := w.setup.Notes
	for i := range book.Len() { // by their first minute
		n, span := book.Note(i)
		if n.Silences() && (n.Instrument == "" || n.Instrument == rules.NoteLogger) && span.From <= last+w.setup.GapMinutes && span.To > last+1 {
			last = span.To - 1
		}
	}
	return last
}
