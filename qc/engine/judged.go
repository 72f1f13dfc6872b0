// Package engine is the judging core: blocks of minutes go in; judged minutes, day summaries and episodes come out. It has no
// clock, no I/O, no goroutine, no map order and no random number in it.
package engine

import (
	"math"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// JudgeVersion is raised only when a golden row digest changes.
const JudgeVersion = 1

// A Judged is the judged minutes of one station on one UTC day, in columns of minute.PerDay rows of which the first Rows are
// known. NaN stands for a value that is not there.
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
}

// A Series is one instrument's judged minutes, or one weather quantity's.
type Series struct {
	Instrument string // the site file's id; the channel's name for weather
	Quantity   rules.Quantity
	Primary    bool      // the one whose values stand in the quantity's columns
	Measured   []float64 // in the quantity's unit, before any correction
	Value      []float64 // after corrections; NaN where absent
	SD         []float64 // of the samples in the minute
	Min, Max   []float64
	N          []uint32 // samples
	U95        []float64
	Verdict    []rules.Verdict
	Missed     []rules.TestSet
	Passed     []rules.TestSet
	Faults     []rules.FaultSet                 // open episodes that reach this minute
	Restored   []bool                           // the value was restored from a fault
	Outcomes   [rules.TestCount][]rules.Outcome // of the tests that this series has; nil for the others
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

// floats cuts slices of PerDay from one allocation.
type floats struct{ rest []float64 }

func (f *floats) cut() []float64 {
	s := f.rest[:minute.PerDay:minute.PerDay]
	f.rest = f.rest[minute.PerDay:]
	return s
}

func fillNaN(s []float64) {
	nan := math.NaN()
	for i := range s {
		s[i] = nan
	}
}
