package fault

import "math"

// A histogram counts values in equal bins, so that a day's median needs no list of its minutes and does not depend on their order.
type histogram struct {
	low, step float64
	counts    []uint16
	n         int
}

func newHistogram(low, high, step float64) histogram {
	return histogram{low: low, step: step, counts: make([]uint16, int(math.Ceil((high-low)/step)))}
}

// add counts a value; one outside the range counts at its end.
func (h *histogram) add(v float64) {
	if math.IsNaN(v) {
		return
	}
	i := int(math.Floor((v - h.low) / h.step))
	h.counts[min(max(i, 0), len(h.counts)-1)]++
	h.n++
}

// addTimes counts a value that stands for several.
func (h *histogram) addTimes(v float64, times int) {
	for range times {
		h.add(v)
	}
}

// quantile is the middle of the bin that holds the share p of the values; NaN without any.
func (h *histogram) quantile(p float64) float64 {
	if h.n == 0 {
		return math.NaN()
	}
	want, seen := float64(p*float64(h.n)), 0
	for i, c := range h.counts {
		seen += int(c)
		if float64(seen) > want || seen == h.n {
			return h.low + float64((float64(i)+0.5)*h.step)
		}
	}
	return math.NaN()
}

// A Fact is what one day said of one number: its median, half the width that holds the middle half, and how many minutes.
type Fact struct {
	Median Number `json:"m"`
	Spread Number `json:"s"`
	N      int    `json:"n"`
}

// asSpread gives the spread in the median's place.
func (f Fact) asSpread() Fact { return Fact{Median: f.Spread, N: f.N} }

func (h *histogram) fact() Fact {
	if h.n == 0 {
		return Fact{Median: Number(math.NaN()), Spread: Number(math.NaN())}
	}
	return Fact{Median: quantise(h.quantile(0.5)), Spread: quantise((h.quantile(0.75) - h.quantile(0.25)) / 2), N: h.n}
}
