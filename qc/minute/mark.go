package minute

import "math"

// IsMark says whether a sample is one of the marks that loggers write in place of a measurement that they could not make: over-range,
// not a number, nothing connected (common practice: -6999, -7999, -9999 and -99999, some with nines behind the point). Infinity is
// one too.
func IsMark(v float64) bool {
	switch v {
	case -6999, -7999, -9999, -9999.9, -9999.99, -99999, -99999.9, -999999:
		return true
	}
	return math.IsInf(v, 0)
}
