package worker

import (
	"cmp"
	"context"
	"maps"
	"slices"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// aheadLimit is how far past the time of receipt a stamp may move the watermark: one reading of 2099 closes nothing.
const aheadLimit = 2 * minute.MicrosPerMinute

// A station is all that the worker keeps of one station. All of it can be rebuilt from the archive and the journal.
type station struct {
	w         *Worker
	id        string
	partition int

	watermark minute.Stamp            // what is stamped before it is taken to have come
	raw       map[int64]*minute.Batch // not yet committed, by the day of its stamps
	late      map[int64]*minute.Batch // not yet in raw, since perhaps known already: came after its minute was judged. By the day of its minutes
	open      *minute.Batch           // of minutes not yet judged, committed or not

	current   *current
	summaries map[int64]engine.DaySummary // of the days before the current one, from loadedFrom on
	// loadedFrom is the first day whose summary was asked of the archive.
	loadedFrom int64
	older      []fault.Episode               // ended before loadedFrom
	lastEnded  int64                         // the last day that has a summary
	judged     map[int64]*engine.Judged      // days before the current one that are to be written
	unsaved    map[int64]bool                // days whose summary the archive does not have
	again      map[int64]string              // days that are to be judged once more, and why
	paid       map[int64]string              // days judged once more since the last commit, and why
	notes      []rules.Note                  // all there are, withdrawn ones too
	newNotes   []rules.Note                  // that the archive does not have
	plans      map[*engine.Plan]*engine.Plan // with the notes, by those without
	sealing    map[int64]bool                // days not yet sealed
	months     map[string]bool               // not yet compacted, YYYY-MM
	committed  []fault.Episode               // as the archive has them
	published  map[string]fault.Episode      // as FINDINGS has them
	rawCut     int64                         // readings before this day were looked for, to be dropped
	told       bool                          // episodes have changed since the last commit
	aside      map[int64]bool                // minutes whose readings have been set aside
}

// A current is the day that the station is in: the last that has a judged minute.
type current struct {
	day      int64
	plan     *engine.Plan
	gatherer *minute.Gatherer
	block    *minute.Block
	judger   *engine.Judger
	judged   *engine.Judged
	excluded map[int]bool // rows whose readings the core cannot bear
	changed  bool         // the archive's rows may not be these
	tickedTo int64        // the minute of the last tick
	idle     bool         // begun by a tick for a silent station: a day without a reading, which is none unless one comes
	tickSaw  bool         // a tick has changed the episodes: on a guess, which what comes now may prove wrong
}

// minuteOf is the UTC minute a stamp belongs to, by the plan of the stamp's own day.
func (s *station) minuteOf(at minute.Stamp) int64 {
	if c := s.current; c != nil && c.day == at.Day() {
		return c.gatherer.Layout().Minute(at)
	}
	plan := s.w.cfg.Rules.PlanFor(s.id, at.Day())
	if plan == nil {
		return at.Minute()
	}
	layout := plan.Layout()
	return layout.Minute(at)
}

// take adds readings of one message, in any order, and judges what they close.
func (s *station) take(ctx context.Context, readings []minute.Reading) {
	late, dropped := 0, 0
	for i := range readings {
		r := readings[i]
		m := s.minuteOf(r.At)
		if s.isClosed(m) {
			late++
			batchOf(s.late, s.id, minute.FloorDiv(m, minute.PerDay)).Append(&r)
		} else {
			left, n := strip(s.open, &r)
			dropped += n
			if !left {
				continue
			}
			s.open.Append(&r)
			batchOf(s.raw, s.id, r.At.Day()).Append(&r)
		}
		s.w.partitions[s.partition].rows++
		seen := r.At
		if r.Received != 0 {
			seen = min(seen, r.Received+aheadLimit)
		}
		s.watermark = max(s.watermark, seen-s.w.grace)
	}
	s.w.cfg.Meter.Readings(s.id, len(readings))
	if late > 0 {
		s.w.cfg.Meter.Late(s.id, late)
	}
	if dropped > 0 {
		s.w.cfg.Meter.Duplicates(dropped)
	}
	s.advance(ctx)
}

func batchOf(of map[int64]*minute.Batch, station string, day int64) *minute.Batch {
	b := of[day]
	if b == nil {
		b = &minute.Batch{Station: station}
		of[day] = b
	}
	return b
}

// isClosed says whether a minute has been judged, or can no longer be in its turn.
func (s *station) isClosed(m int64) bool {
	c := s.current
	if c == nil {
		return m < (s.lastEnded+1)*minute.PerDay
	}
	row := m - c.day*minute.PerDay
	return row < int64(c.block.Rows) || row < minute.PerDay && c.excluded[int(row)]
}

// tick says that the time of day has gone on and nothing waits in the journal.
func (s *station) tick(ctx context.Context, now minute.Stamp) {
	s.watermark = max(s.watermark, now-s.w.grace)
	s.advance(ctx)
	s.endSilentDay(ctx, now)
	if s.current == nil {
		return
	}
	m := s.watermark.Minute()
	if c := s.current; m > c.tickedTo {
		c.tickedTo = m
		s.guard(func() {
			before := c.judger.Episodes()
			c.judger.Tick(m)
			c.tickSaw = c.tickSaw || !sameEpisodes(before, c.judger.Episodes())
		})
		s.tell(ctx)
	}
}

// endSilentDay ends the day of a station that has fallen silent when it is complete, so that it can be sealed, and begins one without
// readings, in which the gap goes on.
func (s *station) endSilentDay(ctx context.Context, now minute.Stamp) {
	if c := s.current; c != nil && !c.idle && isComplete(c.day, now) {
		if c.tickSaw { // it guessed; what a day hands on rests on readings alone
			if err := s.rebuild(ctx); err != nil {
				s.w.drop(s.partition, "read_archive", err)
				return
			}
		}
		s.endDay()
	}
	if day := s.watermark.Day(); s.current == nil && s.lastEnded >= firstDay && day > s.lastEnded {
		if c := s.begin(day); c != nil {
			c.idle, c.changed = true, false
			s.current = c
		}
	}
}

// advance judges the minutes that the watermark has closed.
func (s *station) advance(ctx context.Context) {
	closed := s.watermark.Minute()
	for {
		first, ok := s.firstOpen()
		if !ok || first >= closed {
			return
		}
		day := minute.FloorDiv(first, minute.PerDay)
		if c := s.current; c != nil && c.tickSaw && !(c.idle && c.day < day) {
			from := s.current.block.Rows
			if err := s.rebuild(ctx); err != nil {
				s.w.drop(s.partition, "read_archive", err)
				return
			}
			if s.current != nil {
				s.show(ctx, from)
			}
			continue
		}
		if s.current == nil || s.current.day < day {
			if !s.roll(day) {
				s.dropOpen(func(m int64) bool { return m < (day+1)*minute.PerDay })
				continue
			}
		}
		from := s.current.block.Rows
		if !s.fill(int(min(closed-day*minute.PerDay, minute.PerDay))) {
			if err := s.rebuild(ctx); err != nil {
				s.w.drop(s.partition, "read_archive", err)
				return
			}
		}
		s.show(ctx, from)
	}
}

// firstOpen is the first minute that has a reading and is not judged.
func (s *station) firstOpen() (int64, bool) {
	first, ok := int64(0), false
	for _, at := range s.open.At {
		if m := s.minuteOf(at); !ok || m < first {
			first, ok = m, true
		}
	}
	return first, ok
}

// roll ends the current day and begins another. It says false where no rules hold for the station on that day.
func (s *station) roll(day int64) bool {
	s.endDay()
	c := s.begin(day)
	if c == nil {
		return false
	}
	s.current = c
	return true
}

// endDay closes the current day. Its judged minutes wait for the next commit.
func (s *station) endDay() {
	c := s.current
	if c == nil {
		return
	}
	s.current = nil
	if c.idle {
		s.w.spares.takeBlock(c.plan, c.block)
		s.w.spares.takeJudged(c.plan, c.judged)
		return
	}
	s.summaries[c.day] = s.close(c)
	s.lastEnded = c.day
	s.unsaved[c.day] = true
	s.sealing[c.day] = true
	s.months[monthOf(c.day)] = true
	s.judged[c.day] = c.judged
	s.w.spares.takeBlock(c.plan, c.block)
}

// planFor is the plan that holds on a day, with the station's notes.
func (s *station) planFor(day int64) *engine.Plan {
	base := s.w.cfg.Rules.PlanFor(s.id, day)
	if base == nil || len(s.notes) == 0 {
		return base
	}
	if s.plans[base] == nil {
		s.plans[base] = base.WithNotes(s.notes)
	}
	return s.plans[base]
}

// begin makes the state of a day from the summaries of the days before it.
func (s *station) begin(day int64) *current {
	plan := s.planFor(day)
	if plan == nil {
		return nil
	}
	layout := plan.Layout()
	c := &current{day: day, plan: plan, gatherer: minute.NewGatherer(layout), block: s.w.spares.block(plan, day, len(layout.Channels)),
		excluded: map[int]bool{}, changed: true}
	if !s.guard(func() {
		c.judger = engine.NewJudger(plan, s.history(day))
		c.judged = c.judger.BeginWith(s.w.spares.judgedFor(plan, day))
	}) {
		return nil
	}
	return c
}

// close ends a day that has begun and gives its summary: an empty one where the core cannot close it.
func (s *station) close(c *current) engine.DaySummary {
	sum := engine.DaySummary{Station: s.id, Day: c.day}
	s.guard(func() { sum = c.judger.End() })
	sum.Station, sum.Day = s.id, c.day
	return sum
}

// history is the summaries of the days that the judge looks back on, ascending.
func (s *station) history(day int64) []engine.DaySummary {
	var h []engine.DaySummary
	for d := day - engine.HistoryDays; d < day; d++ {
		if sum, ok := s.summaries[d]; ok {
			h = append(h, sum)
		}
	}
	if len(h) == 0 { // after weeks of silence the last day before them still hands on what was open
		last := int64(firstDay) - 1
		for d := range s.summaries {
			if d < day {
				last = max(last, d)
			}
		}
		if sum, ok := s.summaries[last]; ok {
			h = append(h, sum)
		}
	}
	return h
}

// fill judges the current day's minutes up to the row. It says false where the core could not bear them.
func (s *station) fill(to int) bool {
	c := s.current
	c.idle = false
	c.gatherer.Fill(c.block, s.open, c.block.Rows, to)
	end := c.day*minute.PerDay + int64(to)
	s.dropOpen(func(m int64) bool { return m < end })
	c.changed = true
	return s.judge(c)
}

// judge lets the core judge the rows of the block that it has not judged, and says whether it came through.
func (s *station) judge(c *current) bool {
	return s.guard(func() {
		if s.w.cfg.Trap != nil {
			s.w.cfg.Trap(c.block, c.judged.Rows)
		}
		c.judger.Advance(c.block)
	})
}

// guard runs the core and says whether it came through.
func (s *station) guard(f func()) (ok bool) {
	defer func() {
		if r := recover(); r != nil {
			s.w.panicked(s.id, r)
			ok = false
		}
	}()
	f()
	return true
}

// dropOpen forgets the open readings of some minutes.
func (s *station) dropOpen(which func(m int64) bool) {
	s.open = without(s.open, func(at minute.Stamp) bool { return which(s.minuteOf(at)) })
}

// without is the batch less some of its readings.
func without(b *minute.Batch, drop func(at minute.Stamp) bool) *minute.Batch {
	kept := &minute.Batch{Station: b.Station}
	for i, at := range b.At {
		if !drop(at) {
			r := b.Reading(i)
			kept.Append(&r)
		}
	}
	return kept
}

// show settles the new rows by what is known now and tells those who watch.
func (s *station) show(ctx context.Context, from int) {
	c := s.current
	s.guard(func() { engine.Settle(c.plan, c.judged, s.reaching(s.episodes(), c.day)) })
	if s.w.cfg.Live != nil {
		s.w.cfg.Live.Minutes(c.judged, min(from, c.judged.Rows), c.judged.Rows)
	}
	s.w.cfg.Meter.LastMinute(s.id, time.UnixMicro((c.day*minute.PerDay+int64(c.judged.Rows))*minute.MicrosPerMinute).UTC())
	s.tell(ctx)
}

// tell publishes what has changed in the episodes.
func (s *station) tell(ctx context.Context) {
	episodes := s.episodes()
	var changes []Finding
	now := make(map[string]bool, len(episodes))
	for _, e := range episodes {
		now[e.ID] = true
		if old, ok := s.published[e.ID]; !ok || !sameEpisode(old, e) {
			changes = append(changes, Finding{Episode: e})
			s.published[e.ID] = e
		}
	}
	for _, id := range slices.Sorted(maps.Keys(s.published)) {
		if !now[id] {
			changes = append(changes, Finding{Episode: s.published[id], Withdrawn: true})
			delete(s.published, id)
		}
	}
	if len(changes) == 0 {
		return
	}
	s.told = true
	if s.w.cfg.Live != nil {
		s.w.cfg.Live.Episodes(s.id, episodes)
	}
	if err := s.w.cfg.Findings.Publish(ctx, changes); err != nil {
		s.w.fail("publish_findings", "findings are not published; they are tried again with the next change or minute", err, "station", s.id, "changes", len(changes))
		for i := range changes {
			if id := changes[i].Episode.ID; changes[i].Withdrawn {
				s.published[id] = changes[i].Episode
			} else {
				delete(s.published, id)
			}
		}
	}
}

// episodes is every episode of the station, by the minute it was raised.
func (s *station) episodes() []fault.Episode {
	all := slices.Clone(s.older)
	days := slices.Sorted(maps.Keys(s.summaries))
	for _, d := range days {
		all = append(all, s.summaries[d].Closed...)
	}
	switch {
	case s.current != nil:
		s.guard(func() { all = append(all, s.current.judger.Episodes()...) })
	case len(days) > 0:
		all = append(all, s.summaries[days[len(days)-1]].Open...)
	}
	slices.SortStableFunc(all, func(a, b fault.Episode) int {
		return cmp.Or(cmp.Compare(a.Raised, b.Raised), cmp.Compare(a.ID, b.ID))
	})
	return all
}

// reaching is those of the episodes that cover a minute of the day.
func (s *station) reaching(all []fault.Episode, day int64) []fault.Episode {
	var some []fault.Episode
	for _, e := range all {
		if e.From < (day+1)*minute.PerDay && e.To > day*minute.PerDay {
			some = append(some, e)
		}
	}
	return some
}

// sealAfter is how long after its end a day waits for late readings.
const sealAfter = 48 * time.Hour

func isComplete(day int64, now minute.Stamp) bool {
	return now >= minute.Stamp((day+1)*minute.MicrosPerDay)+minute.Stamp(sealAfter/time.Microsecond)
}

func monthOf(day int64) string { return time.Unix(day*86400, 0).UTC().Format("2006-01") }

// compactable is a month of the station that is sealed to its end and not yet one file; empty if there is none.
func (s *station) compactable(now minute.Stamp) string {
	for _, month := range slices.Sorted(maps.Keys(s.months)) {
		first, err := time.Parse("2006-01", month)
		if err != nil {
			continue
		}
		if !isComplete(minute.Stamp(first.AddDate(0, 1, 0).UnixMicro()).Day()-1, now) {
			return ""
		}
		open := s.current != nil && monthOf(s.current.day) == month
		for day := range s.sealing {
			open = open || monthOf(day) == month
		}
		if !open {
			return month
		}
	}
	return ""
}
