package limit

import (
	"math"

	"fluxwarden/rules"
)

// A Reading2 is what one of two instruments of a quantity said, in the quantity's unit; NaN where it is not there.
type Reading2 struct {
	Value  float64
	U95    float64 // expanded uncertainty of it, k=2
	Before float64 // the minute before
}

// Shares of the floor, which is stated in W/m2 of the whole spectrum, for a part of it (own choice, after the size of the values).
const (
	partnerUVShare  = 0.05
	partnerPARShare = 2
)

// Partner holds two instruments of one quantity against each other.
//
//	|a - b| <= sqrt((factor Ua)^2 + (factor Ub)^2 + floor^2) + moved max(|a - a'|, |b - b'|)
//
// Ua and Ub are their own expanded uncertainties, a' and b' the values of the minute before: on the edge of a cloud two instruments that do
// not follow alike differ honestly. Own choice; factor, floor and moved are limits of the station. Not applicable without both values or
// their uncertainties.
func Partner(q rules.Quantity, a, b *Reading2, l *rules.Limits) rules.Outcome {
	if a.Value != a.Value {
		return rules.NoValue
	}
	if b.Value != b.Value || a.U95 != a.U95 || b.U95 != b.U95 {
		return rules.NoPartner
	}
	floor := l.PartnerFloorWm2
	switch q {
	case rules.UV:
		floor *= partnerUVShare
	case rules.PAR:
		floor *= partnerPARShare
	}
	moved := max(change(a), change(b))
	if math.Abs(a.Value-b.Value) > together(l.PartnerFactor*together(a.U95, b.U95), floor)+float64(l.PartnerMoved*moved) {
		return rules.Miss
	}
	return rules.Pass
}

func change(x *Reading2) float64 {
	if d := math.Abs(x.Value - x.Before); d == d {
		return d
	}
	return 0
}
