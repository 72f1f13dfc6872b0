package engine

import (
	"math"

	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// A localPlan is the station's own tests in CEL and where the values that they may name come from.
type localPlan struct {
	tests  []rules.LocalTest
	house  []int // block columns of the housekeeping
	series [][]int
}

// planLocal marks the series that a test of the station's own is held against.
func (p *Plan) planLocal() {
	p.local.tests = p.Station.Local
	for i := range p.local.tests {
		var against []int
		for _, q := range p.local.tests[i].Of {
			if k := p.primary[q]; k >= 0 {
				against = append(against, k)
				p.series[k].tests |= rules.Local.Of()
			}
		}
		p.local.series = append(p.local.series, against)
	}
	if len(p.local.tests) > 0 {
		for i := range p.Station.Housekeeping {
			p.local.house = append(p.local.house, p.column(p.Station.Housekeeping[i].Channel))
		}
	}
}

func (l *localPlan) columns(j *Judged) {
	if len(l.tests) == 0 {
		return
	}
	for i := range l.tests {
		j.LocalNames = append(j.LocalNames, l.tests[i].Name)
	}
	j.LocalOut = make([]uint32, minute.PerDay)
	j.local = make([]float64, rules.LocalHouse+len(l.house))
}

// localTests asks the station's own tests of a row. It stands behind the diagnosis, which fills in the clear sky.
func (p *Plan) localTests(j *Judged, block *minute.Block, r int) {
	p.localValues(j, block, r)
	for i := range j.Series {
		if c := j.Series[i].Outcomes[rules.Local]; c != nil {
			c[r] = rules.NotRun
		}
	}
	j.LocalOut[r] = 0
	for i := range p.local.tests {
		o := p.local.tests[i].Check.Outcome(j.local)
		if o == rules.Miss {
			j.LocalOut[r] |= 1 << i
		}
		for _, k := range p.local.series[i] {
			s := &j.Series[k]
			c := s.Outcomes[rules.Local]
			// Of several on one series a miss holds, then a pass, then the reason why none applied.
			if s.Measured[r] == s.Measured[r] && (o == rules.Miss || o == rules.Pass && c[r] != rules.Miss || !c[r].Applied()) {
				s.Passed[r] &^= rules.Local.Of()
				s.set(rules.Local, r, o)
			} else if s.Measured[r] != s.Measured[r] {
				c[r] = rules.NoValue
			}
		}
	}
}

// localValues lays out the values that a test may name.
func (p *Plan) localValues(j *Judged, block *minute.Block, r int) {
	v := j.local
	v[rules.LocalZenith], v[rules.LocalAzimuth], v[rules.LocalCosZenith] = j.ApparentZenithDeg[r], j.AzimuthDeg[r], j.CosZenith[r]
	v[rules.LocalExtraterrestrial] = j.ExtraterrestrialWm2[r]
	v[rules.LocalClearGlobal], v[rules.LocalClearDirect] = j.ClearGlobalWm2[r], j.ClearDirectWm2[r]
	v[rules.LocalClearDiffuse], v[rules.LocalClearLWDown] = j.ClearDiffuseWm2[r], j.ClearLWDownWm2[r]
	v[rules.LocalDayOfYear], v[rules.LocalMinuteOfDay] = float64(dayOfYear(j.Day)), float64(r)
	for q := range rules.Quantity(rules.QuantityCount) {
		at := v[rules.LocalQuantities+rules.LocalWidth*int(q):]
		if s := p.primarySeries(j, q); s != nil {
			at[0], at[1], at[2], at[3] = s.Measured[r], s.SD[r], s.Min[r], s.Max[r]
		} else {
			nan := math.NaN()
			at[0], at[1], at[2], at[3] = nan, nan, nan, nan
		}
	}
	for i, c := range p.local.house {
		col := &block.Columns[c]
		if v[rules.LocalHouse+i] = col.Mean[r]; col.N[r] == 0 || limit.IsMark(col.Mean[r]) {
			v[rules.LocalHouse+i] = math.NaN()
		}
	}
}

// dayOfYear is 1 on the first of January; the civil year is found by the rule of 400 years.
func dayOfYear(day int64) int {
	const daysTo2000 = 10957 // 2000-01-01
	d := day - daysTo2000
	y := minute.FloorDiv(400*d, 146097) + 2000 - 1 // at most two years too early
	start := func(y int64) int64 {                 // days from 2000-01-01 to the first of January of y
		n := y - 2000
		return 365*n + minute.FloorDiv(n+3, 4) - minute.FloorDiv(n+99, 100) + minute.FloorDiv(n+399, 400)
	}
	for start(y+1) <= d {
		y++
	}
	return int(d-start(y)) + 1
}

// LocalText writes the names of the tests of the station's own that missed, ';' between.
func (j *Judged) LocalText(out uint32) string { return namesOf(j.LocalNames, out) }
