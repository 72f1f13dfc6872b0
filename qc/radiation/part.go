package radiation

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/rules"
)

func (p Part) plus(o Part) Part { return combine(p, o, func(a, b float64) float64 { return a + b }) }
func (p Part) less(o Part) Part { return combine(p, o, func(a, b float64) float64 { return a - b }) }

// combine gives a value of two with the worse of their verdicts; absent where one of them is, or where the value is not a number.
func combine(a, b Part, of func(a, b float64) float64) Part {
	if a.Verdict == rules.Absent || b.Verdict == rules.Absent {
		return None()
	}
	return Of(of(a.Value, b.Value), max(a.Verdict, b.Verdict))
}

// ratio is a over b where the sun is high enough and b not small.
func ratio(a, b Part, high bool) Part {
	if !high || !(b.Value >= ratioMinWm2) {
		return None()
	}
	return combine(a, b, func(a, b float64) float64 { return a / b })
}

// better says whether the verdict v makes a value of more use than o does.
func better(v, o rules.Verdict) bool {
	return v != rules.Absent && (o == rules.Absent || v < o)
}

func cosDeg(zenithDeg float64) float64 {
	if !(zenithDeg < 90) {
		return 0
	}
	return exact.Cos(zenithDeg * (math.Pi / 180))
}

// A Source says which instruments a derived global rests on.
type Source uint8

const (
	FromNothing  Source = iota
	FromParts           // direct on the horizontal plus diffuse
	FromUnshaded        // the unshaded pyranometer
)

// Best is the global that is best founded: direct on the horizontal plus diffuse where both are accepted, the unshaded pyranometer where
// it is better, by the trade's preference for the sum (its parts know no directional error of the beam; common practice).
func Best(global, direct, diffuse Part, apparentZenithDeg float64) (Part, Source) {
	cosZenith := cosDeg(apparentZenithDeg)
	sum := combine(direct, diffuse, func(b, d float64) float64 { return float64(b*cosZenith) + d })
	switch {
	case sum.Verdict != rules.Absent && !better(global.Verdict, sum.Verdict):
		return sum, FromParts
	case global.Verdict != rules.Absent:
		return global, FromUnshaded
	}
	return None(), FromNothing
}
