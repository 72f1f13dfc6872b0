package minute

import (
	"cmp"
	"math"
	"slices"
)

// A Gatherer turns batches into blocks. What it writes into a row depends on the set of readings given for that row and
// not on their order: samples are taken in order of their stamps, an equal repeat counts once, and of two different
// values under one stamp the lesser counts and the minute is marked. A logger's mark under one stamp is no sample beside real ones:
// only where a minute has nothing else does it stand as the value.
type Gatherer struct {
	layout  Layout
	index   map[string]int
	order   []int
	samples []Value
}

// NewGatherer makes a gatherer for one station's layout.
func NewGatherer(layout Layout) *Gatherer {
	g := &Gatherer{layout: layout, index: make(map[string]int, len(layout.Channels))}
	for i, c := range layout.Channels {
		g.index[c] = i
	}
	return g
}

// Layout is the layout that the gatherer was made for.
func (g *Gatherer) Layout() *Layout { return &g.layout }

// Column is the block column of a channel, -1 where it is not declared.
func (g *Gatherer) Column(channel string) int {
	if i, ok := g.index[channel]; ok {
		return i
	}
	return -1
}

// Days lists the UTC days that the batch's readings belong to, ascending.
func (g *Gatherer) Days(b *Batch) []int64 {
	var days []int64
	last := int64(math.MinInt64)
	for _, at := range b.At {
		if d := FloorDiv(g.layout.Minute(at), PerDay); d != last {
			last = d
			if !slices.Contains(days, d) {
				days = append(days, d)
			}
		}
	}
	slices.Sort(days)
	return days
}

// Fill writes the minutes [from, to) of the block's day from the batch, which holds all readings of those minutes, and
// raises Rows to the last minute that has a record.
func (g *Gatherer) Fill(block *Block, b *Batch, from, to int) {
	first := block.Day*PerDay + int64(from)
	last := block.Day*PerDay + int64(to)
	g.order = g.order[:0]
	sorted := true
	for i, at := range b.At {
		if m := g.layout.Minute(at); m >= first && m < last {
			if n := len(g.order); n > 0 && b.At[g.order[n-1]] > at {
				sorted = false
			}
			g.order = append(g.order, i)
		}
	}
	if !sorted {
		slices.SortStableFunc(g.order, func(x, y int) int { return cmp.Compare(b.At[x], b.At[y]) })
	}
	for k := 0; k < len(g.order); {
		m := g.layout.Minute(b.At[g.order[k]])
		end := k + 1
		for end < len(g.order) && g.layout.Minute(b.At[g.order[end]]) == m {
			end++
		}
		row := int(m - block.Day*PerDay)
		g.fillRow(block, b, row, g.order[k:end])
		block.Rows = max(block.Rows, row+1)
		k = end
	}
}

// fillRow works out one minute from the batch rows that belong to it, sorted by stamp.
func (g *Gatherer) fillRow(block *Block, b *Batch, row int, rows []int) {
	stamps := 0
	for k, i := range rows {
		if k == 0 || b.At[i] != b.At[rows[k-1]] {
			stamps++
		}
		if b.Ahead != nil && b.Ahead[i] {
			block.Ahead[row] = true
		}
	}
	block.Records[row] = uint16(min(stamps, math.MaxUint16))
	for c := range b.Channels {
		col, ok := g.index[b.Channels[c].Name]
		if !ok {
			continue
		}
		g.column(&block.Columns[col], &b.Channels[c], b.At, row, rows)
	}
}

func (g *Gatherer) column(to *Column, from *Channel, at []Stamp, row int, rows []int) {
	if len(rows) == 1 && from.Stats == nil { // the common case: one sample a minute
		v := from.Mean[rows[0]] + 0 // never minus nothing
		if !math.IsNaN(v) {
			to.Mean[row], to.SD[row], to.Min[row], to.Max[row], to.N[row] = v, math.NaN(), v, v, 1
		}
		return
	}
	g.samples = g.samples[:0]
	conflict := false
	marked := math.NaN()
	for k := 0; k < len(rows); {
		best, found := Value{}, false
		end := k
		for ; end < len(rows) && at[rows[end]] == at[rows[k]]; end++ {
			v := from.Value(rows[end])
			if math.IsNaN(v.Mean) {
				continue
			}
			v = whole(v)
			switch {
			case !found:
				best, found = v, true
			case compareValues(v, best) != 0:
				conflict = true
				if compareValues(v, best) < 0 {
					best = v
				}
			}
		}
		k = end
		switch {
		case !found:
		case IsMark(best.Mean):
			marked = orLess(marked, best.Mean)
		default:
			g.samples = append(g.samples, best)
		}
	}
	if len(g.samples) == 0 && marked == marked {
		g.samples = append(g.samples, Single(marked))
	}
	if len(g.samples) > 0 {
		to.Mean[row], to.SD[row], to.Min[row], to.Max[row], to.N[row] = combine(g.samples)
		to.Conflict[row] = conflict
	}
}

// whole fills in what a value leaves out and can have one meaning only, so that 5 and {mean: 5} are the same. A mark among a logger's
// statistics is as if it was not given.
func whole(v Value) Value {
	v.Mean += 0 // never minus nothing
	for _, x := range [...]*float64{&v.SD, &v.Min, &v.Max} {
		if IsMark(*x) {
			*x = math.NaN()
		}
	}
	v.Min, v.Max, v.N = orElse(v.Min, v.Mean)+0, orElse(v.Max, v.Mean)+0, max(v.N, 1)
	return v
}

// compareValues orders values totally, NaN before numbers, so that the choice between two does not depend on arrival.
func compareValues(a, b Value) int {
	return cmp.Or(cmp.Compare(a.Mean, b.Mean), cmp.Compare(a.N, b.N), cmp.Compare(a.SD, b.SD), cmp.Compare(a.Min, b.Min), cmp.Compare(a.Max, b.Max))
}

// combine pools whole samples: the mean weighted by their counts, the standard deviation about it (n-1), least and greatest. The
// pooled standard deviation is not known where a part has a count above one and no standard deviation, or one and no count.
func combine(s []Value) (mean, sd, lo, hi float64, n uint32) {
	if len(s) == 1 {
		v := s[0]
		return v.Mean, v.SD, v.Min, v.Max, uint32(v.N)
	}
	var count, sum float64
	lo, hi = math.Inf(1), math.Inf(-1)
	for i := range s {
		v := &s[i]
		w := float64(v.N)
		count += w
		sum += float64(w * v.Mean)
		lo, hi = math.Min(lo, v.Min), math.Max(hi, v.Max)
	}
	mean = sum / count
	var squares float64
	for i := range s {
		v := &s[i]
		w := float64(v.N)
		d := v.Mean - mean
		squares += float64(w * float64(d*d))
		switch {
		case v.N > 1:
			squares += float64((w - 1) * float64(v.SD*v.SD))
		case !math.IsNaN(v.SD):
			squares = math.NaN()
		}
	}
	return mean, math.Sqrt(squares / (count - 1)), lo, hi, uint32(math.Min(count, math.MaxInt32))
}

// orLess is the lesser of two numbers, of which the first may be NaN.
func orLess(a, b float64) float64 {
	if a < b {
		return a
	}
	return b
}

func orElse(v, instead float64) float64 {
	if math.IsNaN(v) {
		return instead
	}
	return v
}
