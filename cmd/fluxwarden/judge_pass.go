package main

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
)

// A pass judges days of one station in order, from the archive's readings and new ones: what judge and rejudge share. It keeps the last
// days in hand until no episode can reach back to them.
type pass struct {
	archive *store.Archive
	station *rules.Station
	plan    *engine.Plan
	fresh   map[int64]*minute.Batch // new readings by the day of their stamps
	// Days from..to are asked for. The pass begins a hindsight earlier, and goes on until what later days look back on is as it was.
	from, to int64
	helpers  int // goroutines of the stateless stage
	step     func(done, of int)
	out      *months

	known     bool // the archive has this station already
	spares    chan prepared
	inHand    []*engine.Judged // judged, not yet settled
	episodes  []fault.Episode  // that have ended
	same      int              // days in a row whose summary is as it was
	ended     int64            // the last day that has a summary now
	minutes   int
	days      int
	firstDay  int64
	unchanged map[int64]string // summaries in the archive
	loadedTo  int64

	past    []engine.DaySummary // what the judge looks back on, so that it can be made anew after a panic
	trap    func(block *minute.Block, from int)
	leftOut []string // minutes that the judge panicked on, with the reason
}

// errNoReadings says that there is nothing to judge.
var errNoReadings = errors.New("there are no readings to judge")

// run judges and hands the rows, summaries and episodes on. A minute on which the core panics is left out, as a daemon does.
func (p *pass) run() error {
	rawDays, err := p.begin()
	if err != nil {
		return err
	}
	history, err := p.history(p.firstDay)
	if err != nil {
		return err
	}
	p.past = history
	judger := engine.NewJudger(p.plan, history)
	quit := make(chan struct{})
	defer close(quit)
	var last prepared
	n := 0
	for t := range p.prepareAhead(rawDays, quit) {
		pr := <-t.done
		if pr.err != nil {
			return pr.err
		}
		if n++; p.step != nil {
			p.step(n, len(rawDays))
		}
		if pr.panicked == nil && pr.block.Rows == 0 {
			p.reuse(pr)
			continue
		}
		if last.judged != nil {
			stop, err := p.endDay(&judger)
			if err != nil {
				return err
			}
			if stop {
				return p.finishEarly()
			}
		}
		p.reuse(prepared{block: last.block})
		last = prepared{}
		cause := pr.panicked
		if cause == nil {
			cause = guarded(func() {
				judger.BeginWith(pr.judged)
				if p.trap != nil {
					p.trap(pr.block, 0)
				}
				judger.AdvancePrepared(pr.block)
			})
		}
		if cause != nil {
			if pr, judger = p.careful(t, cause); pr.judged == nil {
				continue
			}
		}
		p.days++
		p.inHand = append(p.inHand, pr.judged)
		last = pr
	}
	// The latest day stays open: its later minutes may still come.
	return p.finish(append(p.episodes, judger.Episodes()...))
}

// begin lists the days of stamps to read and settles where to begin.
func (p *pass) begin() ([]int64, error) {
	p.known = slices.Contains(p.archive.Stations(), p.station.ID)
	set := map[int64]bool{}
	if p.known {
		kept, err := p.archive.RawDays(p.station.ID)
		if err != nil {
			return nil, err
		}
		for _, d := range kept {
			set[d] = true
		}
	}
	for d := range p.fresh {
		set[d] = true
	}
	var days []int64
	for d := range set {
		days = append(days, d)
	}
	slices.Sort(days)
	if len(days) == 0 {
		return nil, errNoReadings
	}
	first := days[0]
	if p.plan.Layout().LabelEnd {
		first-- // the first stamp of a day belongs to the day before
	}
	p.firstDay = max(first, p.from-engine.HindsightDays)
	p.ended = math.MinInt64
	p.spares = make(chan prepared, engine.HindsightDays+8)
	at, _ := slices.BinarySearch(days, p.firstDay)
	if at == len(days) {
		return nil, errNoReadings
	}
	return days[at:], nil
}

// history gives the summaries before a day, and keeps the episodes that ended before it.
func (p *pass) history(first int64) ([]engine.DaySummary, error) {
	var out []engine.DaySummary
	if !p.known {
		return nil, nil
	}
	err := p.archive.EachSummary(p.station.ID, math.MinInt32, first-1, func(x store.Summary) error {
		s, err := engine.DecodeSummary(x.JSON)
		if err != nil {
			return fmt.Errorf("station %s: summary of day %s: %w", p.station.ID, dayText(x.Day), err)
		}
		p.episodes = append(p.episodes, s.Closed...)
		if out = append(out, s); len(out) > engine.HistoryDays+1 {
			out = append(out[:0], out[1:]...)
		}
		return nil
	})
	return out, err
}

// endDay closes the day and lets go of those that no episode can reach any more. stop is said when the days asked for are judged and
// nothing that later days look back on has changed.
func (p *pass) endDay(judger **engine.Judger) (stop bool, err error) {
	s := p.end(judger)
	p.ended = s.Day
	p.episodes = append(p.episodes, s.Closed...)
	text, err := engine.EncodeSummary(&s)
	if err != nil {
		return false, err
	}
	was, err := p.summaryBefore(s.Day)
	if err != nil {
		return false, err
	}
	p.same++
	if was != string(text) {
		p.same = 0
		if err := p.out.summary(store.Summary{Station: s.Station, Day: s.Day, JSON: text}); err != nil {
			return false, err
		}
	}
	var now []fault.Episode
	for len(p.inHand) > 0 && p.inHand[0].Day < s.Day-engine.HindsightDays {
		if now == nil {
			now = slices.Concat(p.episodes, s.Open)
		}
		if err := p.letGo(now); err != nil {
			return false, err
		}
	}
	return s.Day >= p.to && p.same > engine.HistoryDays, nil
}

// summaryBefore is the day's summary in the archive as text, empty if there is none.
func (p *pass) summaryBefore(day int64) (string, error) {
	if !p.known {
		return "", nil
	}
	if p.unchanged == nil || day > p.loadedTo {
		p.unchanged, p.loadedTo = map[int64]string{}, day+engine.HistoryDays
		err := p.archive.EachSummary(p.station.ID, day, p.loadedTo, func(s store.Summary) error {
			p.unchanged[s.Day] = string(s.JSON)
			return nil
		})
		if err != nil {
			return "", err
		}
	}
	return p.unchanged[day], nil
}

// letGo settles the oldest day in hand and hands it on.
func (p *pass) letGo(episodes []fault.Episode) error {
	d := p.inHand[0]
	p.inHand = p.inHand[1:]
	engine.Settle(p.plan, d, episodesOf(d.Day, episodes))
	p.minutes += d.Rows
	if err := p.out.add(d); err != nil {
		return err
	}
	p.reuse(prepared{judged: d})
	return nil
}

// episodesOf is those that cover a minute of the day.
func episodesOf(day int64, all []fault.Episode) []fault.Episode {
	var some []fault.Episode
	for i := range all {
		if all[i].From < (day+1)*minute.PerDay && all[i].To > day*minute.PerDay {
			some = append(some, all[i])
		}
	}
	return some
}

// finishEarly ends a pass before the last day: later episodes are those that the archive has.
func (p *pass) finishEarly() error {
	past := map[string]bool{}
	err := p.archive.EachSummary(p.station.ID, math.MinInt32, p.ended, func(x store.Summary) error {
		s, err := engine.DecodeSummary(x.JSON)
		for i := range s.Closed {
			past[s.Closed[i].ID] = true
		}
		return err
	})
	if err != nil {
		return err
	}
	all, err := p.archive.Faults(p.station.ID)
	if err != nil {
		return err
	}
	episodes := p.episodes
	for _, e := range all {
		if !past[e.ID] {
			episodes = append(episodes, e)
		}
	}
	return p.finish(episodes)
}

// finish settles what is left and hands all episodes on.
func (p *pass) finish(episodes []fault.Episode) error {
	for len(p.inHand) > 0 {
		if err := p.letGo(episodes); err != nil {
			return err
		}
	}
	sortEpisodes(episodes)
	p.episodes = episodes
	return p.out.finish(episodes)
}

// sortEpisodes puts episodes in the order in which the archive keeps them.
func sortEpisodes(list []fault.Episode) {
	slices.SortStableFunc(list, func(a, b fault.Episode) int {
		return cmp.Or(cmp.Compare(a.Raised, b.Raised), cmp.Compare(a.ID, b.ID))
	})
}

func dayText(day int64) string { return time.Unix(86400*day, 0).UTC().Format(time.DateOnly) }
