package main

import (
	"fmt"
	"slices"
	"sync"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// A demoBoard gathers what the daemon tells, for the screen.
type demoBoard struct {
	clock *demoClock

	mu       sync.Mutex
	stations []demoRow
	events   []demoEvent // not yet shown
	heard    time.Time   // of the first judged minute, by the wall clock
}

// A demoRow is what is known of one station.
type demoRow struct {
	id, name string
	last     int64 // first minute, since 1970, that is not judged yet; 0 before the first
	judged   int64
	verdicts [rules.VerdictCount]int64
	open     []fault.Episode
}

// A demoEvent is an episode that began or ended.
type demoEvent struct {
	station string
	episode fault.Episode
}

func newDemoBoard(site *rules.Site, clock *demoClock) *demoBoard {
	b := &demoBoard{clock: clock}
	for i := range site.Stations {
		b.stations = append(b.stations, demoRow{id: site.Stations[i].ID, name: site.Stations[i].Name})
	}
	return b
}

func (b *demoBoard) row(id string) *demoRow {
	i := slices.IndexFunc(b.stations, func(r demoRow) bool { return r.id == id })
	return &b.stations[i]
}

// minutes is told of judged minutes; one that is judged again is not counted again.
func (b *demoBoard) minutes(j *engine.Judged, from, to int) {
	b.mu.Lock()
	defer b.mu.Unlock()
	row := b.row(j.Station)
	first := j.Day * minute.PerDay
	from = max(from, int(max(row.last-first, 0)))
	if from >= to {
		return
	}
	if b.heard.IsZero() {
		b.heard = time.Now()
	}
	row.last = first + int64(to)
	row.judged += int64(to - from)
	for k := range j.Series {
		if s := &j.Series[k]; s.Primary && int(s.Quantity) < rules.RadiationCount {
			for i := from; i < to; i++ {
				row.verdicts[s.Verdict[i]]++
			}
		}
	}
}

// episodes is told of all of a station's episodes whenever one of them changes.
func (b *demoBoard) episodes(station string, all []fault.Episode) {
	b.mu.Lock()
	defer b.mu.Unlock()
	row := b.row(station)
	var open []fault.Episode
	for _, e := range all {
		was := slices.ContainsFunc(row.open, func(o fault.Episode) bool { return o.ID == e.ID })
		switch {
		case e.To == fault.Open:
			open = append(open, e)
			if !was {
				b.events = append(b.events, demoEvent{station, e})
			}
		case was:
			b.events = append(b.events, demoEvent{station, e})
		}
	}
	row.open = open
}

// take gives a copy of the rows, and the events since the last time.
func (b *demoBoard) take() ([]demoRow, []demoEvent) {
	b.mu.Lock()
	defer b.mu.Unlock()
	rows := slices.Clone(b.stations)
	events := b.events
	b.events = nil
	return rows, events
}

// total is how many station-minutes were judged.
func (b *demoBoard) total() int64 {
	b.mu.Lock()
	defer b.mu.Unlock()
	var n int64
	for i := range b.stations {
		n += b.stations[i].judged
	}
	return n
}

// firstAfter is how long after a time the first minute was judged.
func (b *demoBoard) firstAfter(begun time.Time) (time.Duration, bool) {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.heard.Sub(begun), !b.heard.IsZero()
}

// share is the part of a verdict in what was judged, percent.
func (r *demoRow) share(v rules.Verdict) float64 {
	var all int64
	for _, n := range r.verdicts {
		all += n
	}
	if all == 0 {
		return 0
	}
	return 100 * float64(r.verdicts[v]) / float64(all)
}

// demoWords says what an episode is.
func demoWords(e *demoEvent) string {
	at := func(minuteUTC int64) string { return time.Unix(60*minuteUTC, 0).UTC().Format("01-02 15:04Z") }
	if e.episode.To == fault.Open {
		return fmt.Sprintf("%s %s: %s", e.station, e.episode.Instrument, e.episode.What(e.episode.Raised))
	}
	return fmt.Sprintf("%s %s: %s is over, from %s to %s", e.station, e.episode.Instrument, e.episode.Kind.Entry().Title, at(e.episode.From), at(e.episode.To))
}
