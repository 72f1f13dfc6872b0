package minute

import "math"

// NoMeasurementAbove is a number that no channel's measurement reaches, in whatever unit: beyond it stand what loggers and file formats
// fill with, like 3.4e38, 7e30 and 9.97e36.
const NoMeasurementAbove = 1e9

// IsMark says whether a sample is one of the marks that loggers write in place of a measurement that they could not make: over-range,
// not a number, nothing connected (common practice: -6999, -7999, -9999 and -99999, some with nines behind the point), or a number
// beyond all measure.
func IsMark(v float64) bool {
	switch v {
	case -6999, -7999, -9999, -9999.9, -9999.99, -99999, -99999.9, -999999:
		return true
	}
	return math.Abs(v) >= NoMeasurementAbove
}
