package worker

import (
	"context"
	"encoding/json"
	"fmt"
	"maps"
	"slices"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
)

// excludedMax is how many minutes of a day may be left out because the core cannot bear them.
const excludedMax = 16

// judgeDay judges a day's minutes before row `to` from all its readings. A minute that makes the core panic is left out, as
// if nothing had been sent; which one it is depends on the readings only. Nil is given where no rules hold or the core
// cannot bear the day at all.
func (s *station) judgeDay(ctx context.Context, day int64, all *minute.Batch, to int) *current {
	excluded := map[int]bool{}
	readings := all
	for range excludedMax {
		c := s.begin(day)
		if c == nil {
			return nil
		}
		c.excluded = excluded
		c.gatherer.Fill(c.block, readings, 0, to)
		if s.judge(c) {
			return c
		}
		row, bad := s.firstBad(day, readings, to)
		if !bad {
			return nil // it goes minute by minute but not at once: that is a bug of the core, and no minute's fault
		}
		excluded[row] = true
		s.setAside(ctx, day*minute.PerDay+int64(row), readings)
		readings = without(all, func(at minute.Stamp) bool {
			m := s.minuteOf(at) - day*minute.PerDay
			return m >= 0 && m < minute.PerDay && excluded[int(m)]
		})
	}
	s.w.fail("judge", "a day is left without rows: too many of its minutes make the judge panic", fmt.Errorf("more than %d", excludedMax),
		"station", s.id, "day", day)
	return nil
}

// firstBad finds the row at which the core panics when it goes minute by minute.
func (s *station) firstBad(day int64, readings *minute.Batch, to int) (row int, found bool) {
	c := s.begin(day)
	if c == nil {
		return 0, false
	}
	c.gatherer.Fill(c.block, readings, 0, to)
	rows := c.block.Rows
	for r := range rows {
		c.block.Rows = r + 1
		if !s.judge(c) {
			return r, true
		}
	}
	return 0, false
}

// setAside shows the readings of a minute to whoever looks after refused ones, once.
func (s *station) setAside(ctx context.Context, m int64, readings *minute.Batch) {
	if s.aside[m] {
		return
	}
	s.aside[m] = true
	var some []minute.Reading
	for i, at := range readings.At {
		if s.minuteOf(at) == m {
			some = append(some, readings.Reading(i))
		}
	}
	s.w.setAside(ctx, ReasonPanic, s.id, some, nil, "the judge panicked on this minute; it counts as not sent until the program is mended")
}

// readings is every reading whose minute is of the day: what the archive has and what is not yet committed. Raw goes by
// the day of the stamp, which for a logger that labels by the end may be the day after.
func (s *station) readings(day int64) (*minute.Batch, error) {
	all := &minute.Batch{Station: s.id}
	to := day
	if plan := s.w.cfg.Rules.PlanFor(s.id, day+1); plan != nil {
		if layout := plan.Layout(); layout.LabelEnd {
			to = day + 1
		}
	}
	err := s.w.cfg.Archive.ReadRaw(s.id, day, to, func(b *minute.Batch) error { appendAll(all, b); return nil })
	if err != nil {
		return nil, err
	}
	for d := day; d <= to; d++ {
		if b := s.raw[d]; b != nil {
			appendAll(all, b)
		}
	}
	first, last := day*minute.PerDay, (day+1)*minute.PerDay
	for _, at := range all.At {
		if m := s.minuteOf(at); m < first || m >= last {
			return without(all, func(at minute.Stamp) bool { m := s.minuteOf(at); return m < first || m >= last }), nil
		}
	}
	return all, nil
}

// rebuild judges the current day again from all its readings, as far as it had come.
func (s *station) rebuild(ctx context.Context) error {
	day := s.current.day
	all, err := s.readings(day)
	if err != nil {
		return err
	}
	to := int(max(0, min(s.watermark.Minute()-day*minute.PerDay, minute.PerDay)))
	c := s.judgeDay(ctx, day, all, to)
	s.dropOpen(func(m int64) bool { return m < (day+1)*minute.PerDay })
	if c == nil {
		// The day stays without rows. What comes for it is kept raw.
		if c = s.begin(day); c == nil {
			s.current = nil
			return nil
		}
	}
	for i, at := range all.At {
		if s.minuteOf(at) >= day*minute.PerDay+int64(to) {
			r := all.Reading(i)
			s.open.Append(&r)
		}
	}
	c.idle = s.current.idle && len(all.At) == 0
	s.w.spares.takeBlock(s.current.plan, s.current.block)
	s.w.spares.takeJudged(s.current.plan, s.current.judged)
	s.current = c
	return nil
}

// foldLate takes the late readings in: what is known already is dropped, the rest joins the raw ones, and the days that
// gained something are owed.
func (s *station) foldLate() error {
	dirty := map[int64]bool{}
	for _, day := range slices.Sorted(maps.Keys(s.late)) {
		all, err := s.readings(day)
		if err != nil {
			return err
		}
		k := newKnown()
		k.add(all)
		b := s.late[day]
		dropped := 0
		for i := range b.At {
			r := b.Reading(i)
			left, n := k.fresh(&r)
			if s.w.cfg.Faulty.NoDedupe {
				r, left, n = b.Reading(i), true, 0
			}
			dropped += n
			if left {
				batchOf(s.raw, s.id, r.At.Day()).Append(&r)
				dirty[day] = true
			}
		}
		s.w.cfg.Meter.Duplicates(dropped)
		delete(s.late, day)
	}
	for day := range dirty {
		s.owe(day, store.ReasonReadings)
	}
	return nil
}

// closedDayAgain judges a day before the current one and says whether what later days may know of it has changed.
func (s *station) closedDayAgain(ctx context.Context, day int64) (moved bool, err error) {
	s.w.cfg.Meter.DayJudgedAgain(s.id)
	all, err := s.readings(day)
	if err != nil {
		return false, err
	}
	if len(all.At) == 0 {
		return false, nil // a note is about a day without readings
	}
	c := s.judgeDay(ctx, day, all, minute.PerDay)
	if c == nil {
		return false, nil
	}
	sum := s.close(c)
	old, had := s.summaries[day]
	moved = !had || !sameSummary(old, sum)
	s.summaries[day] = sum
	if moved {
		s.unsaved[day] = true
	}
	s.lastEnded = max(s.lastEnded, day)
	s.sealing[day], s.months[monthOf(day)] = true, true
	if old := s.judged[day]; old != nil {
		s.w.spares.takeJudged(c.plan, old)
	}
	s.judged[day] = c.judged
	s.w.spares.takeBlock(c.plan, c.block)
	return moved, nil
}

func sameSummary(a, b engine.DaySummary) bool {
	x, errX := json.Marshal(a)
	y, errY := json.Marshal(b)
	return errX == nil && errY == nil && string(x) == string(y)
}

// touched lists the days before the current one whose rows the change of episodes since the last commit may change.
func (s *station) touched(episodes []fault.Episode) []int64 {
	before, after := keyed(s.committed), keyed(episodes)
	last := s.lastEnded
	days := map[int64]bool{}
	mark := func(k reachKey) {
		from := minute.FloorDiv(k.from, minute.PerDay)
		to := last
		if k.to != fault.Open {
			to = min(last, minute.FloorDiv(k.to-1, minute.PerDay))
		}
		for d := from; d <= to; d++ {
			if s.reachOn(before, d) != s.reachOn(after, d) {
				days[d] = true
			}
		}
	}
	for k := range before {
		if !after[k] {
			mark(k)
		}
	}
	for k := range after {
		if !before[k] {
			mark(k)
		}
	}
	return slices.Sorted(maps.Keys(days))
}

// A reachKey is all of an episode that settling a minute may read. Evidence is part of it for the kinds that are reached or
// restored by a number that stands there; that of the others changes often, and no row by it.
type reachKey struct {
	id, instrument string
	evidence       string
	kind, severity uint8
	from, to       int64
}

func keyed(episodes []fault.Episode) map[reachKey]bool {
	m := make(map[reachKey]bool, len(episodes))
	for i := range episodes {
		e := &episodes[i]
		evidence := ""
		if e.Kind.Entry().Restorable || e.Kind == rules.RangeClipped || e.Kind == rules.Shadow {
			evidence = fmt.Sprint(e.Evidence)
		}
		m[reachKey{e.ID, e.Instrument, evidence, uint8(e.Kind), uint8(e.Severity), e.From, e.To}] = true
	}
	return m
}

// reachOn is how the episodes reach into a day, as text to compare.
func (s *station) reachOn(keys map[reachKey]bool, day int64) string {
	begin, end := day*minute.PerDay, (day+1)*minute.PerDay
	var lines []string
	for k := range keys {
		if k.from < end && k.to > begin {
			lines = append(lines, fmt.Sprint(k.id, k.instrument, k.evidence, k.kind, k.severity, max(k.from, begin), min(k.to, end)))
		}
	}
	slices.Sort(lines)
	return fmt.Sprint(lines)
}
