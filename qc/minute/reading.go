// Package minute turns readings into minutes: it knows how loggers stamp, what identifies a value, and how a minute's
// statistics come from a set of samples, whatever order they arrived in. It is pure.
package minute

import "math"

// A Stamp is a time in microseconds since 1970-01-01T00:00:00Z, leap seconds not counted.
type Stamp int64

const (
	MicrosPerSecond = 1_000_000
	MicrosPerMinute = 60 * MicrosPerSecond
	MicrosPerDay    = 1440 * MicrosPerMinute
	PerDay          = 1440 // minutes
)

// FloorDiv is a/b rounded towards minus infinity, for times before 1970.
func FloorDiv(a, b int64) int64 {
	q := a / b
	if a%b != 0 && (a < 0) != (b < 0) {
		q--
	}
	return q
}

// Day is the UTC day that the stamp falls on, in days since 1970-01-01.
func (s Stamp) Day() int64 { return FloorDiv(int64(s), MicrosPerDay) }

// Minute is the UTC minute that the stamp falls on, in minutes since 1970-01-01.
func (s Stamp) Minute() int64 { return FloorDiv(int64(s), MicrosPerMinute) }

// A Value is what one channel said under one stamp: a single sample, or the statistics of several where the logger has
// averaged already.
type Value struct {
	Mean         float64 // finite; a channel without a value is not listed
	SD, Min, Max float64 // NaN where the logger does not give them
	N            int32   // samples behind the mean; 1 for a single sample
}

// Single is the value of one sample.
func Single(v float64) Value { return Value{Mean: v, SD: math.NaN(), Min: v, Max: v, N: 1} }

// A ChannelValue is a value and the channel that it came by.
type ChannelValue struct {
	Channel string
	Value
}

// A Reading is one stamp and the values a station sent for it.
type Reading struct {
	At       Stamp
	Received Stamp // when the gate took it; 0 where it came from a file
	Ahead    bool  // the stamp was further ahead of the time of receipt than clocks differ
	Values   []ChannelValue
}

// A Batch is readings of one station in columns, in any order of time. It is what decoders give and what `raw` stores.
type Batch struct {
	Station  string
	At       []Stamp
	Received []Stamp // nil where they came from a file
	Ahead    []bool  // nil where none was
	Channels []Channel
}

// A Channel is one column of a batch. Its slices are as long as the batch's At; Stats is nil where all are single samples.
type Channel struct {
	Name  string
	Mean  []float64 // NaN where the reading had no value of this channel
	Stats *Stats
}

// Stats are the statistics that a logger sent beside its means, NaN and 0 where it did not.
type Stats struct {
	SD, Min, Max []float64
	N            []int32
}

// Rows is how many readings the batch holds.
func (b *Batch) Rows() int { return len(b.At) }

// Append adds a reading to the batch, adding columns as it needs them.
func (b *Batch) Append(r *Reading) {
	row := len(b.At)
	b.At = append(b.At, r.At)
	if r.Received != 0 && b.Received == nil {
		b.Received = make([]Stamp, row, row+1)
	}
	if b.Received != nil {
		b.Received = append(b.Received, r.Received)
	}
	if r.Ahead && b.Ahead == nil {
		b.Ahead = make([]bool, row, row+1)
	}
	if b.Ahead != nil {
		b.Ahead = append(b.Ahead, r.Ahead)
	}
	for i := range b.Channels {
		b.Channels[i].extend(row + 1)
	}
	for _, v := range r.Values {
		b.column(v.Channel, row+1).set(row, v.Value)
	}
}

// Reading gives row i as a reading of its own.
func (b *Batch) Reading(i int) Reading {
	r := Reading{At: b.At[i]}
	if b.Received != nil {
		r.Received = b.Received[i]
	}
	if b.Ahead != nil {
		r.Ahead = b.Ahead[i]
	}
	for k := range b.Channels {
		c := &b.Channels[k]
		if !math.IsNaN(c.Mean[i]) {
			r.Values = append(r.Values, ChannelValue{c.Name, c.Value(i)})
		}
	}
	return r
}

// Value gives row i of the column; its Mean is NaN where there is none.
func (c *Channel) Value(i int) Value {
	if c.Stats == nil || c.Stats.N[i] == 0 {
		return Single(c.Mean[i])
	}
	return Value{c.Mean[i], c.Stats.SD[i], c.Stats.Min[i], c.Stats.Max[i], c.Stats.N[i]}
}

func (b *Batch) column(name string, rows int) *Channel {
	for i := range b.Channels {
		if b.Channels[i].Name == name {
			return &b.Channels[i]
		}
	}
	b.Channels = append(b.Channels, Channel{Name: name})
	c := &b.Channels[len(b.Channels)-1]
	c.extend(rows)
	return c
}

func (c *Channel) extend(rows int) {
	for len(c.Mean) < rows {
		c.Mean = append(c.Mean, math.NaN())
		if c.Stats != nil {
			c.Stats.extend()
		}
	}
}

func (s *Stats) extend() {
	nan := math.NaN()
	s.SD, s.Min, s.Max, s.N = append(s.SD, nan), append(s.Min, nan), append(s.Max, nan), append(s.N, 0)
}

// set puts a value into a row; where one reading names a channel twice, the last holds.
func (c *Channel) set(row int, v Value) {
	c.Mean[row] = v.Mean
	plain := v.N == 1 && math.IsNaN(v.SD) && v.Min == v.Mean && v.Max == v.Mean
	if plain && c.Stats == nil {
		return
	}
	if c.Stats == nil {
		c.Stats = &Stats{}
		for range len(c.Mean) {
			c.Stats.extend()
		}
	}
	c.Stats.SD[row], c.Stats.Min[row], c.Stats.Max[row], c.Stats.N[row] = v.SD, v.Min, v.Max, v.N
}
