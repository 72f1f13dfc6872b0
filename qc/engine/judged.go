// Package engine is the judging core: blocks of minutes go in; judged minutes, day summaries and episodes come out. It has no
// clock, no I/O, no goroutine, no map order and no random number in it.
package engine

import (
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// JudgeVersion is raised only when a golden row digest changes.
const JudgeVersion = 2

// A Judged is the judged minutes of one station on one UTC day, in columns of minute.PerDay rows of which the first Rows are
// known; the others may hold anything. NaN stands for a value that is not there.
type Judged struct {
	Station string
	Day     int64 // days since 1970-01-01
	Rows    int
	Records []uint16 // stamps in the minute

	ZenithDeg           []float64 // airless, mid-minute
	ApparentZenithDeg   []float64 // with refraction
	AzimuthDeg          []float64 // from north, clockwise
	CosZenith           []float64 // of the apparent zenith, nothing below the horizon
	ExtraterrestrialWm2 []float64 // normal to the beam

	ClearGlobalWm2, ClearDirectWm2, ClearDiffuseWm2, ClearLWDownWm2 []float64 // what a cloudless sky would give

	Series []Series // one an instrument, in the site file's order, then the weather
	Best   []Best   // one a quantity that has more than one source; filled by Settle

	HouseNames []string // of the housekeeping channels that are tested; nil where there are none
	HouseOut   []uint32 // those out of their sound range, a bit each in the order of HouseNames

	LocalNames []string // of the station's own tests; nil where there are none
	LocalOut   []uint32 // those that missed, a bit each in the order of LocalNames

	local []float64  // the values that they may name, of the row in hand
	house []houseRow // what the diagnosis is told of it; nil where there is none
	sun   sunDay
	beam  []float64 // direct normal irradiance that uncertainties are worked out with, W/m2
}

// A Series is one instrument's judged minutes, or one weather quantity's.
type Series struct {
	Instrument string // the site file's id; the channel's name for weather
	Quantity   rules.Quantity
	Primary    bool      // the one whose values stand in the quantity's columns
	Secondary  bool      // the one whose values stand in the quantity's columns for a second instrument
	Measured   []float64 // in the quantity's unit, before any correction but that of optics the site file states; see AsSent
	Value      []float64 // after corrections; NaN where absent
	SD         []float64 // of the samples in the minute
	Min, Max   []float64
	N          []uint32  // samples
	U95        []float64 // expanded uncertainty of Value, k=2
	Verdict    []rules.Verdict
	Missed     []rules.TestSet
	Passed     []rules.TestSet
	Faults     []rules.FaultSet                 // episodes that reach this minute
	Restored   []bool                           // the value was restored from a fault
	Notes      []rules.NoteSet                  // what people said of this minute; nil is nothing
	Outcomes   [rules.TestCount][]rules.Outcome // of the tests that this series has; nil for the others

	Uncorrected []float64 // Measured before the optics were corrected; nil where the site file states none

	offset    []float64 // thermal offset that is taken off, W/m2; nil where none is, NaN where it is not known
	offsetU95 []float64 // U95 of the value without it

	soundU95     []float64 // U95 of Measured; nil for weather
	marked       []bool    // the logger sent a mark instead of a value
	bodyC, domeC []float64 // of a pyrgeometer; nil for others
	net          []float64 // thermopile signal over sensitivity, W/m2; NaN where the logger converts
}

// AsSent is the mean of each minute before any correction.
func (s *Series) AsSent() []float64 {
	if s.Uncorrected != nil {
		return s.Uncorrected
	}
	return s.Measured
}

// Primary gives the series whose values stand in the quantity's columns, nil if the station has none.
func (j *Judged) Primary(q rules.Quantity) *Series {
	for i := range j.Series {
		if j.Series[i].Quantity == q && j.Series[i].Primary {
			return &j.Series[i]
		}
	}
	return nil
}

// Secondary gives the series of the quantity's second instrument, nil if the station has none.
func (j *Judged) Secondary(q rules.Quantity) *Series {
	for i := range j.Series {
		if j.Series[i].Quantity == q && j.Series[i].Secondary {
			return &j.Series[i]
		}
	}
	return nil
}

// newJudged makes the columns of a day; its sun is filled in, no row is known yet.
func newJudged(p *Plan, day int64) *Judged {
	j := &Judged{Station: p.Station.ID, Records: make([]uint16, minute.PerDay)}
	f := floats{}
	for _, c := range []*[]float64{&j.ZenithDeg, &j.ApparentZenithDeg, &j.AzimuthDeg, &j.CosZenith, &j.ExtraterrestrialWm2,
		&j.ClearGlobalWm2, &j.ClearDirectWm2, &j.ClearDiffuseWm2, &j.ClearLWDownWm2, &j.beam} {
		*c = f.cut()
	}
	j.Series = make([]Series, len(p.series))
	for i := range p.series {
		j.Series[i] = p.series[i].columns(&f)
	}
	for _, k := range p.offsets {
		j.Series[k].offset, j.Series[k].offsetU95 = f.cut(), f.cut()
	}
	j.Best = p.bestColumns(&f)
	p.house.columns(j)
	p.local.columns(j)
	j.reset(p, day)
	return j
}

// reset makes the columns ready for another day. What stands in rows that are not known yet is left there.
func (j *Judged) reset(p *Plan, day int64) {
	j.Day, j.Rows = day, 0
	j.sun.fill(p, j, day)
}

func (s *seriesPlan) columns(f *floats) Series {
	out := Series{Instrument: s.id, Quantity: s.quantity, Primary: s.primary, Secondary: s.secondary,
		Measured: f.cut(), Value: f.cut(), SD: f.cut(), Min: f.cut(), Max: f.cut(), U95: f.cut(),
		N: make([]uint32, minute.PerDay), Verdict: make([]rules.Verdict, minute.PerDay), Missed: make([]rules.TestSet, minute.PerDay),
		Passed: make([]rules.TestSet, minute.PerDay), Faults: make([]rules.FaultSet, minute.PerDay), Restored: make([]bool, minute.PerDay),
		Notes:  make([]rules.NoteSet, minute.PerDay),
		marked: make([]bool, minute.PerDay)}
	if s.instrument != nil {
		out.soundU95 = f.cut()
	}
	if s.quantity.Longwave() {
		out.bodyC, out.domeC, out.net = f.cut(), f.cut(), f.cut()
	}
	if s.instrument != nil && len(s.instrument.ShadeRing)+len(s.instrument.Directional) > 0 {
		out.Uncorrected = f.cut()
	}
	for t := range out.Outcomes {
		if s.tests.Has(rules.Test(t)) {
			out.Outcomes[t] = make([]rules.Outcome, minute.PerDay)
		}
	}
	return out
}

// set notes what a test said of a row whose sets of tests were begun by singleTests. A test that is asked again may only turn from not
// applicable to pass or miss.
func (out *Series) set(t rules.Test, r int, o rules.Outcome) {
	c := out.Outcomes[t]
	if c == nil {
		return
	}
	c[r] = o
	switch o {
	case rules.Pass:
		out.Passed[r] |= t.Of()
	case rules.Miss:
		out.Missed[r] |= t.Of()
	}
}

// floats cuts slices of a day's length from large allocations.
type floats struct{ rest []float64 }

func (f *floats) cut() []float64 {
	if len(f.rest) < minute.PerDay {
		f.rest = make([]float64, 32*minute.PerDay)
	}
	s := f.rest[:minute.PerDay:minute.PerDay]
	f.rest = f.rest[minute.PerDay:]
	return s
}
