package main

import (
	"fmt"
	"reflect"
	"slices"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/table"
)

// A months takes judged days, holds each month against the archive and puts into the draft what differs. It works behind the judge's
// back, a month at a time.
type months struct {
	archive *store.Archive
	draft   *store.Draft // nil to compare only
	station string
	site    *rules.Site // whose settings the clean products follow
	known   bool
	reason  func(oldRules []string) string // why rows of days judged by these rules change; nil leaves it to the store

	month     *store.Month
	summaries []store.Summary
	work      chan func() error
	done      chan error
	diff      difference
}

// A difference is how a station's rows and episodes differ from those in the archive.
type difference struct {
	Station    string
	Days       int // whose rows differ or are new
	FirstDay   int64
	LastDay    int64
	Quantities []table.Change
	Model      int
	Come, Gone []fault.Episode
	Changed    []episodeChange
	Summaries  int // days of which the judge has learnt something else
	Products   int // months without another row whose clean products are made anew
	Reasons    []string
}

// An episodeChange is an episode before and after.
type episodeChange struct{ Before, After fault.Episode }

func (d *difference) empty() bool {
	return d.Days == 0 && d.Summaries == 0 && d.Products == 0 && len(d.Come)+len(d.Gone)+len(d.Changed) == 0
}

func newMonths(a *store.Archive, draft *store.Draft, station string) *months {
	m := &months{archive: a, draft: draft, station: station, known: slices.Contains(a.Stations(), station), work: make(chan func() error, 1),
		done: make(chan error, 1)}
	m.diff.Station = station
	work := m.work // stop takes it away
	go func() {
		var err error
		for f := range work {
			if err == nil {
				err = f()
			}
		}
		m.done <- err
	}()
	return m
}

// stop waits for what is under way and gives its error.
func (m *months) stop() error {
	if m.work == nil {
		return nil
	}
	close(m.work)
	m.work = nil
	return <-m.done
}

// put adds content to the draft.
func (m *months) put(c *store.Commit) error {
	if m.draft == nil {
		return nil
	}
	return m.draft.Add(c)
}

// raw adds new readings.
func (m *months) raw(parts []store.RawPart) {
	m.work <- func() error { return m.put(&store.Commit{Raw: parts}) }
}

// add takes a settled day, which may be reused afterwards. Days come in order.
func (m *months) add(d *engine.Judged) error {
	name := time.Unix(86400*d.Day, 0).UTC().Format("2006-01")
	if m.month != nil && m.month.Month != name {
		m.flush()
	}
	if m.month == nil {
		m.month = store.NewMonth(m.station, name)
	}
	return m.month.Add(d)
}

func (m *months) flush() {
	month := m.month
	m.month = nil
	if month != nil {
		m.work <- func() error { return m.compare(month) }
	}
}

func (m *months) compare(month *store.Month) error {
	c, err := m.archive.Compare(month, m.site)
	if err != nil || len(c.Days) == 0 && !c.Products {
		return err
	}
	d := &m.diff
	if len(c.Days) == 0 {
		d.Products++
		return m.put(&store.Commit{Revisions: []*store.Month{month}})
	}
	if d.Days == 0 {
		d.FirstDay = c.Days[0]
	}
	d.Days, d.LastDay = d.Days+len(c.Days), c.Days[len(c.Days)-1]
	d.Quantities, d.Model = table.SumChanges(d.Quantities, c.Quantities), d.Model+c.Model
	content := &store.Commit{Revisions: []*store.Month{month}}
	if m.reason != nil {
		if content.Reason = m.reason(c.Rules); content.Reason != "" && !slices.Contains(d.Reasons, content.Reason) {
			d.Reasons = append(d.Reasons, content.Reason)
		}
	}
	return m.put(content)
}

// summary takes what was learnt of a day and differs from what the archive has. Days come in order; a month's are written together.
func (m *months) summary(s store.Summary) error {
	if n := len(m.summaries); n > 0 && monthName(m.summaries[n-1].Day) != monthName(s.Day) {
		m.flushSummaries()
	}
	m.summaries = append(m.summaries, s)
	m.diff.Summaries++
	return nil
}

func (m *months) flushSummaries() {
	list := m.summaries
	m.summaries = nil
	if len(list) > 0 {
		m.work <- func() error { return m.put(&store.Commit{Summaries: list}) }
	}
}

func monthName(day int64) string { return time.Unix(86400*day, 0).UTC().Format("2006-01") }

// finish hands on what is left, with all episodes of the station, and waits until it is in the draft.
func (m *months) finish(episodes []fault.Episode) error {
	m.flush()
	m.flushSummaries()
	var old []fault.Episode
	if m.known {
		var err error
		if old, err = m.archive.Faults(m.station); err != nil {
			return err
		}
	}
	m.diff.compareEpisodes(old, episodes)
	if n := len(m.diff.Come) + len(m.diff.Gone) + len(m.diff.Changed); n > 0 || !m.known {
		m.work <- func() error {
			return m.put(&store.Commit{Faults: []store.StationFaults{{Station: m.station, Episodes: episodes}}})
		}
	}
	if err := m.stop(); err != nil {
		return fmt.Errorf("station %s: %w", m.station, err)
	}
	return nil
}

// compareEpisodes says which episodes come, go and change.
func (d *difference) compareEpisodes(old, now []fault.Episode) {
	before := map[string]*fault.Episode{}
	for i := range old {
		before[old[i].ID] = &old[i]
	}
	for _, e := range now {
		o := before[e.ID]
		delete(before, e.ID)
		switch {
		case o == nil:
			d.Come = append(d.Come, e)
		case !sameEpisode(o, &e):
			d.Changed = append(d.Changed, episodeChange{*o, e})
		}
	}
	for i := range old {
		if before[old[i].ID] != nil {
			d.Gone = append(d.Gone, old[i])
		}
	}
}

func sameEpisode(a, b *fault.Episode) bool {
	x, y := *a, *b
	if !slices.Equal(x.Also, y.Also) || !slices.Equal(x.Evidence, y.Evidence) {
		return false
	}
	x.Also, x.Evidence, y.Also, y.Evidence = nil, nil, nil, nil
	return reflect.DeepEqual(x, y)
}
