package engine

import (
	"math"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// A Best is the best value that a station has of a quantity, and where it comes from: the primary instrument while it is accepted, else the
// second one, else what is questioned of them in the same order. For global, direct on the horizontal plane plus diffuse goes before
// any pyranometer in the sun, as long as both are accepted (network practice). A direct without a pyrheliometer is worked out from global
// and diffuse, marked as such, and judges neither of them. What is rejected is never used: the value is absent then.
type Best struct {
	Quantity rules.Quantity
	Value    []float64
	U95      []float64 // expanded uncertainty, k=2
	Verdict  []rules.Verdict
	Source   []rules.Source
}

// BestOf gives the best values of a quantity, nil where the station has but one source of it. Global always has one.
func (j *Judged) BestOf(q rules.Quantity) *Best {
	for i := range j.Best {
		if j.Best[i].Quantity == q {
			return &j.Best[i]
		}
	}
	return nil
}

// A bestPlan says what a quantity's best value may come from.
type bestPlan struct {
	quantity   rules.Quantity
	sum        bool // global: direct on the horizontal plane plus diffuse
	difference bool // direct: global less diffuse
}

// derivedZenithMaxDeg is the apparent zenith angle up to which direct is worked out from global and diffuse: beyond it their errors, divided by
// the cosine, are as large as the beam (own choice).
const derivedZenithMaxDeg = 85

// planBest finds the quantities that have more than one source. Global is listed wherever there is any, so that whoever reads archives of
// many stations can ask one column.
func (p *Plan) planBest() {
	has := func(q rules.Quantity) bool { return p.primary[q] >= 0 }
	for q := range rules.Quantity(rules.RadiationCount) {
		b := bestPlan{quantity: q}
		b.sum = q == rules.Global && has(rules.Direct) && has(rules.Diffuse)
		b.difference = q == rules.Direct && !has(rules.Direct) && has(rules.Global) && has(rules.Diffuse)
		if p.secondary[q] >= 0 || b.sum || b.difference || q == rules.Global && has(q) {
			p.best = append(p.best, b)
		}
	}
}

func (p *Plan) bestColumns(f *floats) []Best {
	out := make([]Best, len(p.best))
	for i := range p.best {
		out[i] = Best{p.best[i].quantity, f.cut(), f.cut(), make([]rules.Verdict, minute.PerDay), make([]rules.Source, minute.PerDay)}
	}
	return out
}

// chooseBest fills the best values of the judged rows. It needs their verdicts.
func (p *Plan) chooseBest(j *Judged) {
	for i := range p.best {
		plan, out := &p.best[i], &j.Best[i]
		q := plan.quantity
		first, second := p.primarySeries(j, q), p.secondarySeries(j, q)
		for r := range j.Rows {
			c := noChoice
			if plan.sum {
				c = p.sumAt(j, r)
			}
			if c.verdict != rules.Accepted {
				c = better(better(ownAt(first, rules.FromPrimary, r), ownAt(second, rules.FromSecondary, r)), c)
			}
			if plan.difference {
				c = better(c, p.differenceAt(j, r))
			}
			out.Value[r], out.U95[r], out.Verdict[r], out.Source[r] = c.value, c.u95, c.verdict, c.source
		}
	}
}

// A choice is one candidate for the best value. Its verdict is absent where it may not be used.
type choice struct {
	value, u95 float64
	verdict    rules.Verdict
	source     rules.Source
}

var noChoice = choice{value: math.NaN(), u95: math.NaN()}

// better is the first of two, unless only the second is accepted, or only the second may be used.
func better(a, b choice) choice {
	if a.verdict == rules.Absent || a.verdict == rules.Questioned && b.verdict == rules.Accepted {
		return b
	}
	return a
}

// ownAt is what one instrument offers.
func ownAt(s *Series, source rules.Source, r int) choice {
	if s == nil || s.Verdict[r] != rules.Accepted && s.Verdict[r] != rules.Questioned {
		return noChoice
	}
	return choice{s.Value[r], s.U95[r], s.Verdict[r], source}
}

// instrumentsAt is the better of a quantity's instruments.
func (p *Plan) instrumentsAt(j *Judged, q rules.Quantity, r int) choice {
	return better(ownAt(p.primarySeries(j, q), rules.FromPrimary, r), ownAt(p.secondarySeries(j, q), rules.FromSecondary, r))
}

// sumAt is global as direct on the horizontal plane plus diffuse.
func (p *Plan) sumAt(j *Judged, r int) choice {
	b, d := p.instrumentsAt(j, rules.Direct, r), p.instrumentsAt(j, rules.Diffuse, r)
	if b.verdict == rules.Absent || d.verdict == rules.Absent {
		return noChoice
	}
	mu := j.CosZenith[r]
	u := float64(b.u95 * mu)
	return choice{RoundIrradiance(float64(b.value*mu) + d.value), roundSpread(math.Sqrt(float64(u*u) + float64(d.u95*d.u95))),
		max(b.verdict, d.verdict), rules.DirectDiffuse}
}

// differenceAt is direct as global less diffuse, over the cosine of the zenith angle.
func (p *Plan) differenceAt(j *Judged, r int) choice {
	if !(j.ApparentZenithDeg[r] <= derivedZenithMaxDeg) {
		return noChoice
	}
	g, d := p.instrumentsAt(j, rules.Global, r), p.instrumentsAt(j, rules.Diffuse, r)
	if g.verdict == rules.Absent || d.verdict == rules.Absent {
		return noChoice
	}
	mu := j.CosZenith[r]
	return choice{RoundIrradiance((g.value - d.value) / mu), roundSpread(math.Sqrt(float64(g.u95*g.u95)+float64(d.u95*d.u95)) / mu),
		max(g.verdict, d.verdict), rules.GlobalDiffuse}
}

func (p *Plan) secondarySeries(j *Judged, q rules.Quantity) *Series {
	if k := p.secondary[q]; k >= 0 {
		return &j.Series[k]
	}
	return nil
}
