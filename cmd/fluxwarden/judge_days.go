package main

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
)

// A batchJudge judges the days that new readings touch, and all later ones that the archive has, for what was learnt may have changed. It
// keeps the last days in hand until no episode can reach back to them, then writes whole months.
type batchJudge struct {
	archive   *store.Archive
	site      *rules.Site
	station   *rules.Station
	plan      *engine.Plan
	partition int
	known     bool // the archive has this station already
	bar       *progress

	fresh    map[int64]*minute.Batch // new readings by the day of their stamps
	inHand   []*engine.Judged        // judged, not yet settled
	free     []*engine.Judged
	episodes []fault.Episode
	month    *store.Month
	pending  store.Commit
	writing  chan error // the commit under way
	base     uint64
	minutes  int
	days     int
}

func newBatchJudge(a *store.Archive, s *rules.Site, st *rules.Station, bar *progress) (*batchJudge, error) {
	plan, err := engine.NewPlan(st)
	if err != nil {
		return nil, err
	}
	j := &batchJudge{archive: a, site: s, station: st, plan: plan, partition: broker.PartitionOf(st.ID), bar: bar, fresh: map[int64]*minute.Batch{}}
	last, ok, err := a.Last(j.partition)
	if err != nil {
		return nil, err
	}
	if ok {
		j.base = last.Number
		j.pending.Epoch, j.pending.Positions = last.Epoch, last.Positions
	}
	return j, nil
}

// run judges and commits. New readings are in the archive before or with the minutes that come of them.
func (j *batchJudge) run(all *minute.Batch) error {
	all.Station = j.station.ID
	gatherer := minute.NewGatherer(j.plan.Layout())
	days := gatherer.Days(all)
	for _, p := range splitByDay(all) {
		j.fresh[p.Day] = p.Batch
		j.pending.Raw = append(j.pending.Raw, p)
	}
	j.known = slices.Contains(j.archive.Stations(), j.station.ID)
	var kept []int64
	if j.known {
		var err error
		if kept, err = j.archive.RawDays(j.station.ID); err != nil {
			return err
		}
	}
	history, earlier, err := j.history(days[0])
	if err != nil {
		return err
	}
	// The day that was the latest so far has no summary yet: it was left open, and is judged to its end now.
	closed := int64(math.MinInt64)
	if n := len(history); n > 0 {
		closed = history[n-1].Day
	}
	for _, d := range kept {
		for _, m := range [2]int64{d - 1, d} { // with end labels the first stamp of a day belongs to the day before
			if m > closed && !slices.Contains(days, m) {
				days = append(days, m)
			}
		}
	}
	slices.Sort(days)
	j.episodes = earlier
	judger := engine.NewJudger(j.plan, history)
	stages := j.prepareAhead(days)
	defer stages.stop()
	begun := false // a day that the judger has begun and not ended
	for k := range days {
		p := <-stages.out
		if p.err != nil {
			return p.err
		}
		if p.block.Rows == 0 {
			continue // readings of its first minute may belong to the day before
		}
		if begun {
			if err := j.dayDone(judger); err != nil {
				return err
			}
		}
		judger.BeginWith(p.judged)
		judger.AdvancePrepared(p.block)
		j.inHand = append(j.inHand, p.judged)
		j.days, begun = j.days+1, true
		j.bar.step(k+1, len(days))
	}
	return j.finish(judger) // the latest day stays open: its later minutes may still come
}

// history gives the summaries before a day and the episodes that ended before it.
func (j *batchJudge) history(first int64) ([]engine.DaySummary, []fault.Episode, error) {
	var out []engine.DaySummary
	var ended []fault.Episode
	if !j.known {
		return nil, nil, nil
	}
	list, err := j.archive.Summaries(j.station.ID, math.MinInt32, first-1)
	if err != nil {
		return nil, nil, err
	}
	for i := range list {
		s, err := engine.DecodeSummary(list[i].JSON)
		if err != nil {
			return nil, nil, fmt.Errorf("summary of day %d: %w", list[i].Day, err)
		}
		ended = append(ended, s.Closed...)
		out = append(out, s)
	}
	if n := len(out); n > engine.HistoryDays+1 {
		out = out[n-engine.HistoryDays-1:]
	}
	return out, ended, nil
}

// dayDone ends a day and lets go of those in hand that no episode can reach any more.
func (j *batchJudge) dayDone(judger *engine.Judger) error {
	s := judger.End()
	j.episodes = append(j.episodes, s.Closed...)
	text, err := engine.EncodeSummary(&s)
	if err != nil {
		return err
	}
	j.pending.Summaries = append(j.pending.Summaries, store.Summary{Station: s.Station, Day: s.Day, JSON: text})
	for len(j.inHand) > 0 && j.inHand[0].Day < s.Day-engine.HindsightDays {
		if err := j.letGo(append(slices.Clone(j.episodes), s.Open...)); err != nil {
			return err
		}
	}
	return nil
}

// letGo settles the oldest day in hand and adds it to its month.
func (j *batchJudge) letGo(episodes []fault.Episode) error {
	d := j.inHand[0]
	j.inHand = j.inHand[1:]
	engine.Settle(j.plan, d, episodes)
	j.minutes += d.Rows
	month := time.Unix(86400*d.Day, 0).UTC().Format("2006-01")
	if j.month != nil && j.month.Month != month {
		if err := j.write(); err != nil {
			return err
		}
	}
	if j.month == nil {
		j.month = store.NewMonth(j.station.ID, month)
	}
	if err := j.month.Add(d); err != nil {
		return err
	}
	j.free = append(j.free, d)
	return nil
}

// write commits the month in hand while the next is judged.
func (j *batchJudge) write() error {
	if err := j.await(); err != nil {
		return err
	}
	c := j.pending
	c.Partition, c.Base, c.RulesDigest, c.Program = j.partition, j.base, j.site.Digest, "fluxwarden "+version
	if j.month != nil {
		c.Months = []*store.Month{j.month}
	}
	j.month = nil
	j.pending = store.Commit{Epoch: c.Epoch, Positions: c.Positions}
	j.base++
	j.writing = make(chan error, 1)
	go func() {
		_, err := j.archive.Commit(&c)
		j.writing <- err
	}()
	return nil
}

func (j *batchJudge) await() error {
	if j.writing == nil {
		return nil
	}
	err := <-j.writing
	j.writing = nil
	if errors.Is(err, store.ErrLostPartition) {
		return fmt.Errorf("another program wrote to the archive meanwhile; run judge again: %w", err)
	}
	return err
}

// finish settles what is left and writes it with all episodes.
func (j *batchJudge) finish(judger *engine.Judger) error {
	j.episodes = append(j.episodes, judger.Episodes()...)
	for len(j.inHand) > 0 {
		if err := j.letGo(j.episodes); err != nil {
			return err
		}
	}
	slices.SortStableFunc(j.episodes, func(a, b fault.Episode) int { return int(a.Raised - b.Raised) })
	j.pending.Faults = []store.StationFaults{{Station: j.station.ID, Episodes: j.episodes}}
	if err := j.write(); err != nil {
		return err
	}
	return j.await()
}
