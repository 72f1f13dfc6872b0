package engine

import (
	"math"

	"fluxwarden/qc/limit"
	"fluxwarden/rules"
)

// againstOthers are the tests that hold one quantity against another. Only the primary instrument of a quantity is asked.
const againstOthers = rules.TestSet(1<<rules.Closure | 1<<rules.DiffuseRatio | 1<<rules.Albedo | 1<<rules.LWAir | 1<<rules.LWPair | 1<<rules.Rayleigh |
	1<<rules.ClearSky)

// pairUp finds the second instrument of each quantity, and what its best value may come from.
func (p *Plan) pairUp() {
	for i := range p.series {
		s := &p.series[i]
		if s.instrument == nil || s.primary {
			continue
		}
		s.tests &^= againstOthers
		q := s.quantity
		if p.primary[q] < 0 || p.secondary[q] >= 0 {
			continue
		}
		s.secondary, p.secondary[q] = true, i
		s.tests |= rules.Partner.Of()
		p.series[p.primary[q]].tests |= rules.Partner.Of()
	}
	p.planBest()
}

// partnerTests holds the two instruments of a quantity against each other, as measured. It needs their uncertainties.
func (p *Plan) partnerTests(j *Judged, from, to int) {
	for q := range rules.Quantity(rules.RadiationCount) {
		if p.secondary[q] < 0 {
			continue
		}
		a, b := &j.Series[p.primary[q]], &j.Series[p.secondary[q]]
		for r := from; r < to; r++ {
			va, vb := readingFor(a, r), readingFor(b, r)
			o := limit.Partner(q, &va, &vb, &p.Station.Limits)
			setPair(a, rules.Partner, r, o)
			setPair(b, rules.Partner, r, o)
		}
	}
}

// readingFor is what a series says to its partner.
func readingFor(s *Series, r int) limit.Reading2 {
	before := math.NaN()
	if r > 0 { // the day before need not be there: the first minute of a day has none
		before = partner(s, r-1)
	}
	return limit.Reading2{Value: partner(s, r), U95: s.soundU95[r], Before: before}
}
