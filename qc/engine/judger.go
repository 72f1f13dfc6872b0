package engine

import (
	"math"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
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
	block   *minute.Block
	watcher *fault.Watcher
	runs    []limit.Run // one a series
	offsets []offsetState
	minute  fault.Minute
	above   int // minutes on end in which global was far above the clear sky, today

	global, direct, diffuse []float64 // measured by the primaries on the day begun; without a value where there is none
}

// NewJudger makes a judger that stands at the end of the last day of history. History is ascending and may be longer than
// HistoryDays or have holes. Of a day more than HistoryDays before the next only what it carries over is used, and only if no later
// day is there: a caller that trims history keeps the last day, however old.
func NewJudger(plan *Plan, history []DaySummary) *Judger {
	return &Judger{plan: plan, history: append([]DaySummary(nil), history...), runs: make([]limit.Run, len(plan.series))}
}

// Begin starts a day. The Judged that it returns grows with Advance and belongs to the caller; days before it that had no
// reading need not be given.
func (j *Judger) Begin(day int64) *Judged {
	return j.BeginWith(j.plan.NewJudged(day))
}

// BeginWith starts a day in columns made by Plan.NewJudged or Plan.Reset. Rows that Plan.Prepare has filled already are not
// prepared again if the caller then uses AdvancePrepared.
func (j *Judger) BeginWith(judged *Judged) *Judged {
	j.judged, j.block = judged, nil
	j.global, j.direct, j.diffuse = j.measured(rules.Global), j.measured(rules.Direct), j.measured(rules.Diffuse)
	j.minute = fault.Minute{BodyC: math.NaN(), NetWm2: math.NaN(), PrecipitationMM: math.NaN()}
	for q := range j.minute.Value {
		j.minute.Value[q] = math.NaN()
	}
	var facts []fault.DayFacts
	var carry *fault.Carry
	carriedFrom := int64(0)
	for i := range j.history {
		if h := &j.history[i]; h.Day < judged.Day {
			if h.Day >= judged.Day-HistoryDays {
				facts = append(facts, h.Facts)
			}
			// However old it is: a station may be silent for weeks, and what was open then is open still.
			carry, carriedFrom = &h.Carry, h.Day
		}
	}
	j.beginOffsets(judged.Day)
	j.above = 0
	j.watcher = fault.NewWatcher(j.plan.setup, judged.Day, facts, carry)
	for i := range j.runs {
		j.runs[i] = limit.Run{Value: math.NaN()}
		// A run goes on over midnight, but a day without a minute ends it.
		if carry != nil && carriedFrom == judged.Day-1 && i < len(carry.Runs) {
			j.runs[i] = limit.Run{Value: carry.Runs[i].Value.Float(), Count: carry.Runs[i].Count}
		}
	}
	return judged
}

// Advance judges the rows of the block beyond those judged already, up to block.Rows.
func (j *Judger) Advance(block *minute.Block) {
	if block.Rows > j.judged.Rows {
		j.plan.Prepare(j.judged, block, j.judged.Rows, block.Rows)
	}
	j.AdvancePrepared(block)
}

// AdvancePrepared is Advance for rows that Plan.Prepare has been through already.
func (j *Judger) AdvancePrepared(block *minute.Block) {
	j.block = block
	for r := j.judged.Rows; r < block.Rows; r++ {
		j.sequence(r)
		j.watch(r)
		if len(j.offsets) > 0 {
			j.takeOffsets(r)
		}
		if j.judged.local != nil {
			j.plan.localTests(j.judged, block, r)
		}
		j.judged.Rows = r + 1
	}
}

func (j *Judger) measured(q rules.Quantity) []float64 {
	if s := j.plan.primarySeries(j.judged, q); s != nil {
		return s.Measured
	}
	return j.plan.nothing
}

// sequence is the part of a minute that needs the minutes before it.
func (j *Judger) sequence(r int) {
	l := &j.plan.Station.Limits
	sun := &j.judged.sun.rows[r]
	for i := range j.judged.Series {
		s := &j.judged.Series[i]
		j.runs[i].Next(s.Measured[r])
		if s.Outcomes[rules.Stuck] != nil {
			s.set(rules.Stuck, r, limit.Stuck(&j.runs[i], s.Quantity, sun, l))
		}
		if spike := s.Outcomes[rules.Spike]; spike != nil {
			spike[r] = rules.NoHistory // until the next minute is there
			if r >= 2 {
				s.set(rules.Spike, r-1, j.spike(s, r-1))
			}
		}
	}
}

// spike holds row r against its neighbours. It looks at what was measured: the value may have been restored meanwhile, and what is judged
// may not depend on that.
func (j *Judger) spike(s *Series, r int) rules.Outcome {
	l := &j.plan.Station.Limits
	v := s.Measured[r-1 : r+2 : r+2]
	nan := math.NaN()
	if s.Quantity.Longwave() {
		return limit.Spike(v[0], v[1], v[2], nan, nan, nan, l.SpikeLWWm2, false)
	}
	if o := limit.Spike(v[0], v[1], v[2], nan, nan, nan, l.SpikeWm2, true); o != rules.NoPartner {
		return o // no partner is asked for
	}
	return limit.Spike(v[0], v[1], v[2], j.expected(s.Quantity, r-1), j.expected(s.Quantity, r), j.expected(s.Quantity, r+1), l.SpikeWm2, true)
}

// expected is what the other two of global, direct and diffuse say that this one should be; NaN where they do not.
func (j *Judger) expected(q rules.Quantity, r int) float64 {
	g, b, d := j.global[r], j.direct[r], j.diffuse[r]
	mu := j.judged.CosZenith[r]
	switch q {
	case rules.Global:
		return float64(b*mu) + d
	case rules.Diffuse:
		return g - float64(b*mu)
	case rules.Direct:
		if mu > 0.05 {
			return (g - d) / mu
		}
	}
	return math.NaN()
}

// watch hands the minute to the diagnosis.
func (j *Judger) watch(r int) {
	m, d := &j.minute, j.judged
	m.Minute = d.Day*minute.PerDay + int64(r)
	m.ZenithDeg, m.AzimuthDeg, m.Mu = d.ApparentZenithDeg[r], d.AzimuthDeg[r], d.CosZenith[r]
	m.SaWm2 = RoundIrradiance(d.sun.sunlightWm2(r))
	m.Hidden = d.sun.rows[r].Hidden
	m.Records = int(d.Records[r])
	m.AnyConflict = false
	for i := range d.Series {
		s := &d.Series[i]
		if !s.Primary {
			continue
		}
		m.Value[s.Quantity], m.Marked[s.Quantity], m.Run[s.Quantity] = s.Measured[r], s.marked[r], j.runs[i].Count
		m.AnyConflict = m.AnyConflict || s.Missed[r].Has(rules.Conflict)
		if s.Quantity == rules.LWDown {
			m.BodyC, m.NetWm2 = s.bodyC[r], s.net[r]
		}
	}
	if d.house != nil {
		d.house[r].tell(m)
	}
	if m.Minute%fault.SkyInputsEvery == 0 {
		m.Sky = j.plan.liveSky(j.block, r)
	}
	j.watcher.Minute(m)
	d.ClearGlobalWm2[r], d.ClearDirectWm2[r] = RoundIrradiance(m.Clear[rules.Global]), RoundIrradiance(m.Clear[rules.Direct])
	d.ClearDiffuseWm2[r], d.ClearLWDownWm2[r] = RoundIrradiance(m.Clear[rules.Diffuse]), RoundIrradiance(m.Clear[rules.LWDown])
	j.clearSky(r)
}

// Tick says that nothing more will come before the minute (counted from 1970): gaps are seen by it. It changes no row.
func (j *Judger) Tick(minuteUTC int64) {
	if j.watcher != nil {
		j.watcher.Tick(minuteUTC)
	}
}

// End closes the day: its rows become minute.PerDay, the block's with them, and what later days may know of it is returned.
func (j *Judger) End() DaySummary {
	if j.block != nil && j.block.Rows < minute.PerDay {
		j.block.Rows = minute.PerDay
		j.Advance(j.block)
	}
	s := DaySummary{Station: j.plan.Station.ID, Day: j.judged.Day}
	s.Facts, s.Carry = j.watcher.EndDay()
	for i := range j.runs {
		s.Carry.Runs = append(s.Carry.Runs, fault.RunState{Value: fault.Number(j.runs[i].Value), Count: j.runs[i].Count})
	}
	for _, e := range j.watcher.Episodes() {
		if e.To == fault.Open {
			s.Open = append(s.Open, e)
		} else {
			s.Closed = append(s.Closed, e)
		}
	}
	s.Carry.Open = s.Open
	s.Offsets = j.offsetFacts()
	j.history = append(j.history, s)
	for len(j.history) > HistoryDays+1 {
		j.history = append(j.history[:0], j.history[1:]...)
	}
	return s
}

// Episodes lists the episodes that are open now, and those that ended on the day begun last, by the minute they were raised.
// Those that ended on earlier days stand in these days' summaries.
func (j *Judger) Episodes() []fault.Episode {
	if j.watcher == nil {
		return nil
	}
	return j.watcher.Episodes()
}
