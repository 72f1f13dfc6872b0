package main

import (
	"fmt"
	"os"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
)

// leaveOutMax is how many minutes of a day may be left out because the core cannot bear them; a daemon bears as many.
const leaveOutMax = 16

// guarded runs f and gives what it panicked with, nil if it came through.
func guarded(f func()) (cause any) {
	defer func() { cause = recover() }()
	f()
	return nil
}

// careful judges a day that made the core panic once more, with a judge made anew from the summaries of the days before: each minute that it
// cannot bear is left out, as if nothing had been sent for it. Which these are depends on the readings only. A day with too many of them is
// left without rows.
func (p *pass) careful(t *dayTask, cause any) (prepared, *engine.Judger) {
	layout := p.plan.Layout()
	g := minute.NewGatherer(layout)
	out := map[int64]bool{}
	for range leaveOutMax {
		readings := p.without(t.readings, &layout, out)
		pr := prepared{block: minute.NewBlock(t.day, len(layout.Channels)), judged: p.plan.NewJudged(t.day)}
		judger := engine.NewJudger(p.plan, p.past)
		if guarded(func() {
			g.Fill(pr.block, readings, 0, minute.PerDay)
			judger.BeginWith(pr.judged)
			p.advance(judger, pr.block)
		}) == nil {
			if pr.block.Rows == 0 {
				return prepared{}, engine.NewJudger(p.plan, p.past)
			}
			return pr, judger
		}
		row, ok := p.firstBad(g, t.day, readings)
		if !ok {
			break
		}
		out[t.day*minute.PerDay+int64(row)] = true
		p.leave(fmt.Sprintf("%s %s: left out, as if not sent", p.station.ID, time.Unix(60*(t.day*minute.PerDay+int64(row)), 0).UTC().Format("2006-01-02T15:04Z")), cause)
	}
	p.leave(fmt.Sprintf("%s %s: the day is left without rows", p.station.ID, dayText(t.day)), cause)
	return prepared{}, engine.NewJudger(p.plan, p.past)
}

func (p *pass) leave(what string, cause any) {
	p.leftOut = append(p.leftOut, fmt.Sprintf("%s: the judge panicked: %v", what, cause))
	fmt.Fprintln(os.Stderr, p.leftOut[len(p.leftOut)-1])
}

func (p *pass) advance(judger *engine.Judger, block *minute.Block) {
	if p.trap != nil {
		p.trap(block, 0)
	}
	judger.Advance(block)
}

// firstBad finds the row at which the core panics when it goes minute by minute.
func (p *pass) firstBad(g *minute.Gatherer, day int64, readings *minute.Batch) (row int, found bool) {
	block := minute.NewBlock(day, len(g.Layout().Channels))
	g.Fill(block, readings, 0, minute.PerDay)
	judger := engine.NewJudger(p.plan, p.past)
	judger.Begin(day)
	rows := block.Rows
	for r := range rows {
		block.Rows = r + 1
		if guarded(func() { p.advance(judger, block) }) != nil {
			return r, true
		}
	}
	return 0, false
}

// without is the readings less those of some minutes.
func (p *pass) without(b *minute.Batch, layout *minute.Layout, out map[int64]bool) *minute.Batch {
	if len(out) == 0 {
		return b
	}
	kept := &minute.Batch{Station: b.Station}
	for i, at := range b.At {
		if !out[layout.Minute(at)] {
			r := b.Reading(i)
			kept.Append(&r)
		}
	}
	return kept
}

// end closes the judge's day. Where it cannot, the day hands on nothing, and the judge is made anew.
func (p *pass) end(judger **engine.Judger) engine.DaySummary {
	day := p.inHand[len(p.inHand)-1].Day
	s := engine.DaySummary{}
	cause := guarded(func() { s = (*judger).End() })
	if cause != nil {
		s = engine.DaySummary{}
		p.leave(fmt.Sprintf("%s %s: hands nothing on to later days", p.station.ID, dayText(day)), cause)
	}
	s.Station, s.Day = p.station.ID, day
	p.past = append(p.past, s)
	for len(p.past) > engine.HistoryDays+1 {
		p.past = append(p.past[:0:0], p.past[1:]...)
	}
	if cause != nil {
		*judger = engine.NewJudger(p.plan, p.past)
	}
	return s
}
