package engine

import (
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
)

// A Judger carries one station's judging from minute to minute and from day to day:
//
//	j := NewJudger(plan, history)
//	j.Begin(day); j.Advance(block) as often as the block grows; summary := j.End()
//
// Splitting a day into more or fewer calls of Advance changes nothing. A Judger made anew from the summaries of the days
// before goes on exactly as the old one would have.
type Judger struct {
	plan    *Plan
	history []DaySummary
	judged  *Judged
}

// NewJudger makes a judger that stands at the end of the last day of history. History is ascending and may be longer than
// HistoryDays or have holes; what is older than HistoryDays before the next day is not used.
func NewJudger(plan *Plan, history []DaySummary) *Judger {
	return &Judger{plan: plan, history: history}
}

// Begin starts a day. The Judged that it returns grows with Advance and belongs to the caller; days before it that had no
// reading need not be given.
func (j *Judger) Begin(day int64) *Judged {
	j.judged = newJudged(j.plan, day)
	return j.judged
}

// Advance judges the rows of the block beyond those judged already, up to block.Rows.
func (j *Judger) Advance(block *minute.Block) {
	j.judged.Rows = block.Rows
}

// Tick says that nothing more will come before the minute (counted from 1970): gaps are seen by it. It changes no row.
func (j *Judger) Tick(minuteUTC int64) {}

// End closes the day: its rows become minute.PerDay, and what later days may know of it is returned.
func (j *Judger) End() DaySummary {
	return DaySummary{}
}

// Episodes lists the episodes that are open now, and those that ended on the day begun last, by the minute they were raised.
// Those that ended on earlier days stand in these days' summaries.
func (j *Judger) Episodes() []fault.Episode { return nil }

// Settle works out verdicts, reasons and restored values of the judged rows from their tests and from the episodes
// that reach them. It may be called again when episodes have changed.
func Settle(plan *Plan, j *Judged, episodes []fault.Episode) {}

func newJudged(plan *Plan, day int64) *Judged { return &Judged{Station: plan.Station.ID, Day: day} }
