package table

import (
	"math"
	"slices"
	"strings"

	"fluxwarden/qc/minute"
)

// Suffixes of the columns for what a logger sent beside its mean. A channel's name has no colon.
const (
	suffixSD  = ":sd"
	suffixMin = ":min"
	suffixMax = ":max"
	suffixN   = ":n"
)

// FromBatch gives a batch as a table, sorted by time and otherwise as it came: values keep all their bits. The channels are columns
// by their names, in order of name; statistics have columns only where a logger sent some.
func FromBatch(b *minute.Batch) *Table {
	n := b.Rows()
	order := make([]int, n)
	sorted := true
	for i := range order {
		order[i] = i
		sorted = sorted && (i == 0 || b.At[i] >= b.At[i-1])
	}
	if !sorted {
		slices.SortStableFunc(order, func(x, y int) int { return int(max(-1, min(1, b.At[x]-b.At[y]))) })
	}
	t := &Table{Rows: n}
	add := func(c Column, v Vector) { t.Columns, t.Vectors = append(t.Columns, c), append(t.Vectors, v) }
	stamps := func(s []minute.Stamp, null minute.Stamp) Vector {
		if s == nil {
			return Vector{}
		}
		out := make([]int64, n)
		for i, k := range order {
			out[i] = int64(s[k])
			if s[k] == null {
				out[i] = NullTime
			}
		}
		return Vector{Times: out}
	}
	const unit = "microseconds since 1970-01-01 00:00:00Z"
	add(Column{Name: "time", Unit: unit, StandardName: "time", Description: "stamp of the reading as sent, UTC", Kind: Time, Required: true}, stamps(b.At, NullTime))
	add(Column{Name: "received", Unit: unit, Description: "when the gate took it, UTC; null where it came from a file", Kind: Time}, stamps(b.Received, 0))
	ahead := make([]bool, n)
	if b.Ahead != nil {
		for i, k := range order {
			ahead[i] = b.Ahead[k]
		}
	}
	add(Column{Name: "ahead", Description: "the stamp was ahead of the time of receipt", Kind: Bool, Required: true}, Vector{Bools: ahead})
	channels := make([]*minute.Channel, len(b.Channels))
	for i := range b.Channels {
		channels[i] = &b.Channels[i]
	}
	slices.SortStableFunc(channels, func(x, y *minute.Channel) int { return strings.Compare(x.Name, y.Name) })
	for _, c := range channels {
		addChannel(t, c, order)
	}
	return t
}

func addChannel(t *Table, c *minute.Channel, order []int) {
	double := func(suffix string, values []float64) {
		out := make([]float64, len(order))
		some := suffix == ""
		for i, k := range order {
			out[i] = values[k]
			some = some || !math.IsNaN(values[k])
		}
		if some {
			t.Columns = append(t.Columns, Column{Name: c.Name + suffix, Description: "as received", Kind: Double})
			t.Vectors = append(t.Vectors, Vector{Doubles: out})
		}
	}
	double("", c.Mean)
	if c.Stats == nil {
		return
	}
	double(suffixSD, c.Stats.SD)
	double(suffixMin, c.Stats.Min)
	double(suffixMax, c.Stats.Max)
	out, some := make([]int32, len(order)), false
	for i, k := range order {
		out[i] = NullInt
		if c.Stats.N[k] != 0 {
			out[i], some = c.Stats.N[k], true
		}
	}
	if some {
		t.Columns = append(t.Columns, Column{Name: c.Name + suffixN, Unit: "1", Description: "samples", Kind: Int})
		t.Vectors = append(t.Vectors, Vector{Ints: out})
	}
}

// ToBatch gives back the batch that the table was made of, in order of time.
func ToBatch(station string, t *Table) *minute.Batch {
	b := &minute.Batch{Station: station, At: make([]minute.Stamp, t.Rows)}
	for i := range t.Columns {
		c, v := &t.Columns[i], &t.Vectors[i]
		switch {
		case c.Name == "time" && v.Times != nil:
			for r, x := range v.Times {
				b.At[r] = minute.Stamp(x)
			}
		case c.Name == "received":
			if v.Times != nil {
				b.Received = make([]minute.Stamp, t.Rows)
				for r, x := range v.Times {
					if x != NullTime {
						b.Received[r] = minute.Stamp(x)
					}
				}
			}
		case c.Name == "ahead":
			if v.Bools != nil && slices.Contains(v.Bools, true) {
				b.Ahead = v.Bools
			}
		default:
			toChannel(b, c, v, t.Rows)
		}
	}
	return b
}

func toChannel(b *minute.Batch, c *Column, v *Vector, rows int) {
	name, suffix, hasSuffix := strings.Cut(c.Name, ":")
	k := slices.IndexFunc(b.Channels, func(x minute.Channel) bool { return x.Name == name })
	if k < 0 {
		b.Channels = append(b.Channels, minute.Channel{Name: name, Mean: filled(rows, nan)})
		k = len(b.Channels) - 1
	}
	ch := &b.Channels[k]
	if !hasSuffix {
		if v.Doubles != nil {
			ch.Mean = v.Doubles
		}
		return
	}
	if ch.Stats == nil {
		ch.Stats = &minute.Stats{SD: filled(rows, nan), Min: filled(rows, nan), Max: filled(rows, nan), N: make([]int32, rows)}
	}
	switch {
	case ":"+suffix == suffixSD && v.Doubles != nil:
		ch.Stats.SD = v.Doubles
	case ":"+suffix == suffixMin && v.Doubles != nil:
		ch.Stats.Min = v.Doubles
	case ":"+suffix == suffixMax && v.Doubles != nil:
		ch.Stats.Max = v.Doubles
	case ":"+suffix == suffixN && v.Ints != nil:
		for r, x := range v.Ints {
			if x != NullInt {
				ch.Stats.N[r] = x
			}
		}
	}
}
