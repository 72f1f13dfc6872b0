package worker

import (
	"context"
	"maps"
	"math"
	"slices"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
)

// Days that a stamp can fall on, by what the gate lets in.
var (
	firstDay = minute.Stamp(time.Date(1950, 1, 1, 0, 0, 0, 0, time.UTC).UnixMicro()).Day()
	lastDay  = minute.Stamp(time.Date(2101, 1, 1, 0, 0, 0, 0, time.UTC).UnixMicro()).Day()
)

// lookBackDays is how many days of summaries are read at first: what the judge looks back on, and what hindsight may reach.
const lookBackDays = engine.HistoryDays + engine.HindsightDays + 2

// sealingDays is for how many past days a start does not know whether they are sealed, and seals them.
const sealingDays = 5

// recoverStation makes a station's state from the archive: the readings of the days that have no summary are taken as if
// they had just come.
func (w *Worker) recoverStation(ctx context.Context, partition int, id string) (*station, error) {
	s := &station{w: w, id: id, partition: partition, watermark: math.MinInt64 / 2, raw: map[int64]*minute.Batch{}, late: map[int64]*minute.Batch{},
		open: &minute.Batch{Station: id}, summaries: map[int64]engine.DaySummary{}, lastEnded: firstDay - 1, judged: map[int64]*engine.Judged{},
		unsaved: map[int64]bool{}, again: map[int64]string{}, paid: map[int64]string{}, plans: map[*engine.Plan]*engine.Plan{}, sealing: map[int64]bool{}, months: map[string]bool{}, published: map[string]fault.Episode{}, aside: map[int64]bool{}}
	var err error
	if s.committed, err = w.cfg.Archive.Faults(id); err != nil {
		return nil, err
	}
	for _, e := range s.committed {
		s.published[e.ID] = e
	}
	if s.notes, err = w.cfg.Archive.Notes(id); err != nil {
		return nil, err
	}
	today := minute.Stamp(w.cfg.Clock.Now().UnixMicro()).Day()
	s.loadedFrom = lastDay + 1
	if err := s.load(today - lookBackDays); err != nil {
		return nil, err
	}
	if len(s.summaries) == 0 { // long silent, or new
		err = s.load(firstDay)
	} else {
		err = s.load(s.lastEnded - lookBackDays)
	}
	if err != nil {
		return nil, err
	}
	for d := range s.summaries {
		s.months[monthOf(d)] = true
		if d > today-sealingDays {
			s.sealing[d] = true
		}
	}
	if err := s.takeUncommittedDays(ctx); err != nil {
		return nil, err
	}
	if err := s.takeOwed(); err != nil {
		return nil, err
	}
	s.showRecovered()
	return s, nil
}

// showRecovered tells those who watch what the archive knew: without it a fault that has not changed since a restart would be
// open in the archive only.
func (s *station) showRecovered() {
	if s.w.cfg.Live != nil {
		s.w.cfg.Live.Episodes(s.id, s.episodes())
	}
	if s.current == nil && s.lastEnded >= firstDay {
		s.w.cfg.Meter.LastMinute(s.id, time.Unix((s.lastEnded+1)*86400, 0).UTC())
	}
}

func (s *station) takeUncommittedDays(ctx context.Context) error {
	err := s.w.cfg.Archive.ReadRaw(s.id, s.lastEnded+1, lastDay, func(b *minute.Batch) error {
		appendAll(s.open, b)
		return nil
	})
	if err != nil {
		return err
	}
	ended := (s.lastEnded + 1) * minute.PerDay
	s.dropOpen(func(m int64) bool { return m < ended })
	for i, at := range s.open.At {
		seen := at
		if s.open.Received != nil && s.open.Received[i] != 0 {
			seen = min(seen, s.open.Received[i]+aheadLimit)
		}
		s.watermark = max(s.watermark, seen-s.w.grace)
	}
	s.advance(ctx)
	return nil
}

// load reads the summaries from the day on, as far as they are not here already.
func (s *station) load(from int64) error {
	from = max(from, firstDay)
	if from >= s.loadedFrom {
		return nil
	}
	sums, err := s.w.cfg.Archive.Summaries(s.id, from, s.loadedFrom-1)
	if err != nil {
		return err
	}
	for _, sum := range sums {
		s.summaries[sum.Day] = sum
		s.lastEnded = max(s.lastEnded, sum.Day)
	}
	if len(s.summaries) == 0 && from > firstDay { // silent for weeks: the last day before them is looked back on all the same
		earlier, err := s.w.cfg.Archive.Summaries(s.id, firstDay, from-1)
		if err != nil {
			return err
		}
		if n := len(earlier); n > 0 {
			s.summaries[earlier[n-1].Day] = earlier[n-1]
			s.lastEnded = max(s.lastEnded, earlier[n-1].Day)
		}
	}
	s.loadedFrom = from
	s.older = s.older[:0]
	inSummaries := map[string]bool{}
	for _, d := range slices.Sorted(maps.Keys(s.summaries)) {
		for _, e := range s.summaries[d].Closed {
			inSummaries[e.ID] = true
		}
	}
	for _, e := range s.committed {
		if e.To < from*minute.PerDay && !inSummaries[e.ID] {
			s.older = append(s.older, e)
		}
	}
	return nil
}

// trim forgets the summaries that neither the judge nor hindsight needs any more.
func (s *station) trim() {
	if s.current == nil {
		return
	}
	keep := s.current.day - lookBackDays
	if s.loadedFrom >= keep {
		return
	}
	newest := int64(firstDay) - 1
	for d := range s.summaries {
		if d < s.current.day {
			newest = max(newest, d)
		}
	}
	for d := range s.summaries {
		if d < keep && d != newest {
			s.older = append(s.older, s.summaries[d].Closed...)
			delete(s.summaries, d)
		}
	}
	s.loadedFrom = keep
}
