package wire

import (
	"fmt"
	"math"

	"fluxwarden/qc/minute"
)

// value reads what stands behind a channel's name: a number, null, or the statistics of an averaged value.
func (d *Decoder) value(name string) (v minute.Value, present bool, f *flaw) {
	switch d.peek() {
	case 'n':
		return v, false, d.null()
	case '{':
		return d.statistics(name)
	}
	x, f := d.number(name)
	return minute.Single(x), true, f
}

func (d *Decoder) number(name string) (float64, *flaw) {
	x, end, syntax, finite := scanNumber(d.buf, d.pos, false)
	if !syntax {
		return 0, &flaw{BadValue, fmt.Sprintf("channel %s: %s", name, d.found("a number or null"))}
	}
	if !finite {
		return 0, &flaw{BadValue, fmt.Sprintf("channel %s: %s is beyond the range of a 64-bit number", name, quote(d.buf[d.pos:end]))}
	}
	d.pos = end
	return x, nil
}

func (d *Decoder) statistics(name string) (v minute.Value, present bool, f *flaw) {
	d.pos++
	nan := math.NaN()
	parts := [5]float64{nan, nan, nan, nan, nan} // mean, sd, min, max, n
	var seen [5]bool
	for first := true; ; first = false {
		key, end, f := d.key(first)
		if f != nil {
			return v, false, f
		}
		if end {
			break
		}
		i := statistic(key)
		if i < 0 {
			return v, false, &flaw{UnknownKey, fmt.Sprintf("channel %s: key %s: a value has mean, sd, min, max and n only", name, quote(key))}
		}
		if seen[i] {
			return v, false, &flaw{DuplicateKey, fmt.Sprintf("channel %s: %s is given twice", name, key)}
		}
		seen[i] = true
		if d.peek() == 'n' {
			f = d.null()
		} else {
			parts[i], f = d.number(name)
		}
		if f != nil {
			return v, false, f
		}
	}
	if !seen[0] {
		return v, false, &flaw{MissingKey, fmt.Sprintf("channel %s: mean is missing", name)}
	}
	return checkStatistics(name, parts)
}

func statistic(key []byte) int {
	switch string(key) {
	case "mean":
		return 0
	case "sd":
		return 1
	case "min":
		return 2
	case "max":
		return 3
	case "n":
		return 4
	}
	return -1
}

// checkStatistics holds the parts of an averaged value against each other. Without an n it counts as one sample.
func checkStatistics(name string, p [5]float64) (v minute.Value, present bool, f *flaw) {
	mean, sd, lo, hi, n := p[0], p[1], p[2], p[3], p[4]
	if math.IsNaN(n) {
		n = 1
	}
	switch {
	case n != math.Trunc(n) || n < 1 || n > SamplesMax:
		return v, false, &flaw{BadValue, fmt.Sprintf("channel %s: n is %g: it is a whole number from 1", name, n)}
	case sd < 0:
		return v, false, &flaw{BadValue, fmt.Sprintf("channel %s: sd is %g: it cannot be negative", name, sd)}
	case lo > hi:
		return v, false, &flaw{BadValue, fmt.Sprintf("channel %s: min %g is above max %g", name, lo, hi)}
	}
	if math.IsNaN(mean) {
		return v, false, nil
	}
	return minute.Value{Mean: mean, SD: sd, Min: lo, Max: hi, N: int32(n)}, true, nil
}
