package minute

import (
	"math"
	"time"
)

// A Layout says how a station's stamps become minutes and which channels have a column.
type Layout struct {
	LabelEnd bool          // the stamp is the end of the interval that the record stands for
	Interval time.Duration // between records, 1 s to 60 s
	Channels []string      // the declared channels, in column order
}

// Minute is the UTC minute, counted from 1970, that a record with this stamp belongs to.
func (l *Layout) Minute(at Stamp) int64 {
	if l.LabelEnd {
		at -= Stamp(l.Interval / time.Microsecond)
	}
	return at.Minute()
}

// SamplesExpected is how many records make a whole minute.
func (l *Layout) SamplesExpected() int { return int(time.Minute / l.Interval) }

// A Block is the minutes of one station on one UTC day, in columns of PerDay rows. Row i is the minute i of the day.
type Block struct {
	Day     int64    // days since 1970-01-01
	Rows    int      // minutes known so far: rows from here on say nothing yet
	Records []uint16 // stamps that fell into the minute, each counted once
	Ahead   []bool   // one of them was ahead of the time of receipt
	Columns []Column // one a declared channel, in the layout's order
}

// A Column is one channel's statistics, PerDay rows. Where N is 0 the others are NaN.
type Column struct {
	Mean, SD, Min, Max []float64 // SD is NaN for a single sample without its own
	N                  []uint32
	Conflict           []bool // two different values came under one stamp
}

// NewBlock makes an empty block for a day.
func NewBlock(day int64, channels int) *Block {
	b := &Block{Records: make([]uint16, PerDay), Ahead: make([]bool, PerDay), Columns: make([]Column, channels)}
	for i := range b.Columns {
		f := make([]float64, 4*PerDay)
		b.Columns[i] = Column{Mean: f[:PerDay], SD: f[PerDay : 2*PerDay], Min: f[2*PerDay : 3*PerDay], Max: f[3*PerDay:],
			N: make([]uint32, PerDay), Conflict: make([]bool, PerDay)}
	}
	b.Reset(day)
	return b
}

// Reset empties the block for another day.
func (b *Block) Reset(day int64) {
	b.Day, b.Rows = day, 0
	clear(b.Records)
	clear(b.Ahead)
	nan := math.NaN()
	for i := range b.Columns {
		c := &b.Columns[i]
		for k := range c.Mean {
			c.Mean[k], c.SD[k], c.Min[k], c.Max[k] = nan, nan, nan, nan
		}
		clear(c.N)
		clear(c.Conflict)
	}
}
