package fault

import "fluxwarden/rules"

// seeGap raises data_gap: no record of any channel for GapMinutes after the minute that the station was last heard. It is raised at the minute at which the wait was over, whenever
// that is noticed, so that a run from files and a live one say the same.
func (w *Watcher) seeGap(heard int64) {
	if w.openIndex(Logger, rules.DataGap) >= 0 {
		return
	}
	from := heard + 1
	w.raise(Episode{Instrument: Logger, Kind: rules.DataGap, Severity: rules.Act, From: from, Raised: from + w.setup.GapMinutes,
		Confidence: 1, Evidence: []Evidence{{"no_record", float64(w.setup.GapMinutes), "min"}}})
}

// closeGap ends it with the first record.
func (w *Watcher) closeGap(now int64) {
	if i := w.openIndex(Logger, rules.DataGap); i >= 0 {
		w.open[i].Evidence = []Evidence{{"no_record", float64(now - w.open[i].From), "min"}}
		w.finish(i, now)
	}
}
