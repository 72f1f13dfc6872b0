package sensor

import (
	"math"

	"fluxwarden/qc/exact"
)

// ZeroCelsiusK is 0 degrees C in kelvin.
const ZeroCelsiusK = 273.15

// SteinhartHart holds the coefficients of 1/T = A + B ln R + C (ln R)^3, T in K and R in ohm
// (Steinhart and Hart 1968, Deep-Sea Res. 15, 497).
type SteinhartHart struct{ A, B, C float64 }

// Thermistor10k is the 10 kohm (at 25 C) curve found in pyrgeometers. From memory of the trade;
// it meets the nominal table of the part within 0.02 K from -40 to 50 C.
var Thermistor10k = SteinhartHart{A: 1.0295e-3, B: 2.391e-4, C: 1.568e-7}

// ThermistorCurve finds a curve by the name used in site files: "10k". The second result is
// false for an unknown name.
func ThermistorCurve(name string) (SteinhartHart, bool) {
	if name == "10k" {
		return Thermistor10k, true
	}
	return SteinhartHart{}, false
}

// TemperatureK returns the temperature in K for a resistance in ohm. Zero, negative and infinite
// resistances (a short, an open circuit) and results outside 150..450 K give NaN.
// Worked value: 298.1334 K (24.9834 C) at 10000 ohm on Thermistor10k.
func (s SteinhartHart) TemperatureK(ohm float64) float64 {
	if !(ohm > 0 && ohm <= math.MaxFloat64) {
		return math.NaN()
	}
	l := exact.Log(ohm)
	t := 1 / (s.A + float64(l*(s.B+float64(s.C*l*l))))
	if !(t >= 150 && t <= 450) {
		return math.NaN()
	}
	return t
}

// ResistanceOhm inverts TemperatureK (Cardano's formula; C must be positive). Outside
// 150..450 K: NaN.
func (s SteinhartHart) ResistanceOhm(temperatureK float64) float64 {
	if !(temperatureK >= 150 && temperatureK <= 450) || !(s.C > 0) {
		return math.NaN()
	}
	half := (s.A - 1/temperatureK) / s.C / 2
	third := s.B / (3 * s.C)
	root := math.Sqrt(float64(third*third*third) + float64(half*half))
	// ln R = u - third/u with u the positive cube root; no difference of near equals.
	u := exact.Pow(root+math.Abs(half), 1.0/3)
	l := u - third/u
	if half > 0 {
		l = -l
	}
	return exact.Exp(l)
}
