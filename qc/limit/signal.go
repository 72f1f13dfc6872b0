package limit

import (
	"math"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// MarkBelow is the value below which a number is a logger's mark for over-range or not-a-number and no measurement: the
// usual marks are -6999, -7999, -9999 and their like (common practice).
const MarkBelow = -6000

// IsMark says whether a channel's value is a logger's mark: then the channel counts as having sent nothing.
func IsMark(v float64) bool { return v <= MarkBelow || v >= minute.NoMeasurementAbove }

// Signal tests that the raw signal lies within the logger's range, low and high in the signal's own unit, NaN where not
// stated. At a rail the true value is not known.
func Signal(signal, low, high float64) rules.Outcome {
	if math.IsNaN(signal) {
		return rules.NoValue
	}
	if signal <= low || signal >= high {
		return rules.Miss
	}
	return rules.Pass
}

// BodyTemperature tests that a pyrgeometer's case or dome can be as warm as its thermistor claims: within the station's bounds and,
// where the air temperature is known, not further from it than BodyFromAirK (Long & Shi 2008, from memory: 10 to 20 K).
func BodyTemperature(bodyC, airC float64, l *rules.Limits) rules.Outcome {
	if math.IsNaN(bodyC) {
		return rules.NoValue
	}
	if bodyC < l.BodyMinC || bodyC > l.BodyMaxC {
		return rules.Miss
	}
	if AirUsable(airC, l) && math.Abs(bodyC-airC) > l.BodyFromAirK {
		return rules.Miss
	}
	return rules.Pass
}
