package product

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/radiation"
	"fluxwarden/qc/uncertainty"
	"fluxwarden/rules"
	"fluxwarden/store/table"
)

// Settings are what a site file says of the products.
type Settings struct {
	NightZero bool // shortwave below zero is set to zero at night; otherwise all of it is kept
}

const (
	// nightZenithDeg is from where on it is night for shortwave: Roesch et al. 2011, as the network's monthly means have it.
	nightZenithDeg = 93
	// lowZenithDeg is the sun 5 degrees above the horizon: below it an hour may be missing (World Radiation Data Centre), and a ratio of
	// fluxes means little.
	lowZenithDeg = 85
)

// A clear is one value that may be used, with the two parts of its expanded uncertainty: what is correlated from minute to minute, and the
// square of what is not.
type clear struct{ value, correlated, sampling2 float64 }

// dayMinutes is one day's minutes as they go into the products.
type dayMinutes struct {
	rows     int
	minuteOf []int32 // of the day
	zenith   []float64
	apparent []float64
	bound    [2][]float64 // clear-sky global and direct
	beyond   []float64    // extraterrestrial on the horizontal
	source   []radiation.Source
	of       [variableCount][]clear
	present  [variableCount]bool
	not      [rules.QuantityCount][2][]bool // questioned, rejected
}

func newDayMinutes() *dayMinutes {
	d := &dayMinutes{minuteOf: make([]int32, minute.PerDay), source: make([]radiation.Source, minute.PerDay), beyond: make([]float64, minute.PerDay)}
	for v := range d.of {
		d.of[v] = make([]clear, minute.PerDay)
	}
	for q := range d.not {
		d.not[q] = [2][]bool{make([]bool, minute.PerDay), make([]bool, minute.PerDay)}
	}
	return d
}

var nan = math.NaN()

// A reader finds the columns of judged minutes once for a table.
type reader struct {
	times                             []int64
	zenith, apparent, beyond          []float64
	clearGlobal, clearDirect, clearLW []float64
	quantities                        [rules.QuantityCount]quantityReader
}

type quantityReader struct {
	value, u95, sd []float64
	n, verdict     []int32
	code           [rules.VerdictCount]int32 // of a verdict in the dictionary, -2 where it is not in it
}

func doubles(t *table.Table, name string) []float64 {
	if v := t.Find(name); v != nil && v.Doubles != nil {
		return v.Doubles
	}
	return nil
}

func newReader(t *table.Table) *reader {
	r := &reader{times: t.Find("time").Times, zenith: doubles(t, "zenith_deg"), apparent: doubles(t, "apparent_zenith_deg"),
		beyond: doubles(t, "extraterrestrial"), clearGlobal: doubles(t, "clear_global"), clearDirect: doubles(t, "clear_direct"), clearLW: doubles(t, "clear_lw_down")}
	for q := rules.Quantity(0); int(q) < rules.QuantityCount; q++ {
		x, name := &r.quantities[q], q.String()
		x.value, x.u95, x.sd = doubles(t, name), doubles(t, name+"_u95"), doubles(t, name+"_sd")
		if v := t.Find(name + "_n"); v != nil {
			x.n = v.Ints
		}
		v := t.Find(name + "_verdict")
		if v == nil || v.Codes == nil {
			continue
		}
		x.verdict = v.Codes
		for k := range x.code {
			x.code[k] = -2
		}
		for code, word := range v.Dict {
			for k := range x.code {
				if rules.Verdict(k).String() == word {
					x.code[k] = int32(code)
				}
			}
		}
	}
	return r
}

func at(s []float64, i int) float64 {
	if s == nil {
		return nan
	}
	return s[i]
}

// read takes rows from..to of the table, which are of one day.
func (d *dayMinutes) read(r *reader, from, to int, s Settings) {
	d.rows = to - from
	d.present = [variableCount]bool{}
	for i := range d.rows {
		d.minuteOf[i] = int32(minute.Stamp(r.times[from+i]).Minute() % minute.PerDay)
	}
	cut := func(s []float64) []float64 {
		if s == nil {
			return nil
		}
		return s[from:to]
	}
	d.zenith, d.apparent, d.bound = cut(r.zenith), cut(r.apparent), [2][]float64{cut(r.clearGlobal), cut(r.clearDirect)}
	for q := range rules.QuantityCount {
		d.readQuantity(rules.Quantity(q), &r.quantities[q], from, s)
	}
	for i := range d.rows {
		d.derive(r, i, from+i)
	}
	if !d.present[rules.Global] && !d.present[rules.Direct] && !d.present[rules.Diffuse] {
		// By night nothing needs to be measured to know that the sun does not shine; of a station without shortwave it says nothing.
		d.present[vSunshine], d.present[vCloudGlobal], d.present[vCloudNet] = false, false, false
	}
}

func (d *dayMinutes) readQuantity(q rules.Quantity, x *quantityReader, from int, s Settings) {
	of := d.of[q]
	zero := s.NightZero && q.Shortwave()
	for i := range d.rows {
		of[i] = clear{nan, nan, 0}
		d.not[q][0][i], d.not[q][1][i] = false, false
		if x.verdict == nil || x.verdict[from+i] == table.NullCode {
			continue
		}
		d.present[q] = true
		switch x.verdict[from+i] {
		case x.code[rules.Accepted]:
			c := clear{value: at(x.value, from+i), correlated: at(x.u95, from+i)}
			if zero && c.value < 0 && at(d.zenith, i) > nightZenithDeg {
				c.value = 0
			}
			if sd := at(x.sd, from+i); sd == sd && x.n != nil && x.n[from+i] > 1 {
				c.sampling2 = uncertainty.Coverage * uncertainty.Coverage * sd * sd / float64(x.n[from+i])
			}
			rest := float64(c.correlated*c.correlated) - c.sampling2
			if rest < 0 { // both were rounded before they were stored
				rest = 0
			}
			if c.correlated == c.correlated {
				c.correlated = math.Sqrt(rest)
			}
			of[i] = c
		case x.code[rules.Questioned]:
			d.not[q][0][i] = true
		case x.code[rules.Rejected]:
			d.not[q][1][i] = true
		}
	}
}

func part(c clear) radiation.Part { return radiation.Of(c.value, rules.Accepted) }

// derive works out the budget of row i of the day, row k of the table.
func (d *dayMinutes) derive(r *reader, i, k int) {
	q := func(q rules.Quantity) *clear { return &d.of[q][i] }
	apparent := at(r.apparent, k)
	best, source := radiation.Best(part(*q(rules.Global)), part(*q(rules.Direct)), part(*q(rules.Diffuse)), apparent)
	d.source[i] = source
	down := clear{value: round(best.Value, table.StepIrradiance)}
	cosZenith := 0.0
	if apparent < 90 {
		cosZenith = exact.Cos(apparent * (math.Pi / 180))
	}
	switch source {
	case radiation.FromParts:
		beam := *q(rules.Direct)
		beam.correlated, beam.sampling2 = float64(beam.correlated*cosZenith), float64(beam.sampling2*cosZenith*cosZenith)
		down.combine(&beam, q(rules.Diffuse))
	case radiation.FromUnshaded:
		down.correlated, down.sampling2 = q(rules.Global).correlated, q(rules.Global).sampling2
	}
	d.beyond[i] = at(r.beyond, k) * cosZenith
	b := radiation.Surface(&radiation.Minute{Global: radiation.Of(down.value, best.Verdict), Direct: part(*q(rules.Direct)), Diffuse: part(*q(rules.Diffuse)),
		Reflected: part(*q(rules.Reflected)), LWDown: part(*q(rules.LWDown)), LWUp: part(*q(rules.LWUp)), AirTemperature: part(*q(rules.AirTemperature)),
		ApparentZenithDeg: apparent, ExtraterrestrialWm2: at(r.beyond, k), ClearGlobalWm2: at(r.clearGlobal, k), ClearLWDownWm2: at(r.clearLW, k)})
	d.put(vShortwaveDown, i, down)
	short, long := clear{value: b.NetShortwave.Value}, clear{value: b.NetLongwave.Value}
	short.combine(&down, q(rules.Reflected))
	long.combine(q(rules.LWDown), q(rules.LWUp))
	both := clear{value: b.Net.Value}
	both.combine(&short, &long)
	d.put(vNetShortwave, i, short)
	d.put(vNetLongwave, i, long)
	d.put(vNet, i, both)
	for v, p := range withoutUncertainty(&b) {
		d.put(v+vCloudGlobal, i, clear{p.Value, nan, 0})
	}
}

// withoutUncertainty lists what has no uncertainty, in the order of the variables from vCloudGlobal on.
func withoutUncertainty(b *radiation.Budget) [variableCount - vCloudGlobal]radiation.Part {
	p := [...]radiation.Part{b.CloudGlobal, b.CloudLongwave, b.CloudNet, b.Sunshine, b.Albedo, b.DiffuseFraction, b.ClearnessIndex, b.SkyEmissivity,
		{Value: b.SkyTemperatureC.Value}}
	return p
}

func (d *dayMinutes) put(v, i int, c clear) {
	c.value = round(c.value, variables[v].step)
	d.of[v][i] = c
	d.present[v] = d.present[v] || c.value == c.value
}

// combine gives c the uncertainty of a sum or a difference of two that are independent.
func (c *clear) combine(a, b *clear) {
	c.correlated = math.Sqrt(float64(a.correlated*a.correlated) + float64(b.correlated*b.correlated))
	c.sampling2 = a.sampling2 + b.sampling2
}

func round(x, step float64) float64 { return table.Round(x, step) }

// u95 is the expanded uncertainty of one minute.
func (c *clear) u95() float64 { return math.Sqrt(float64(c.correlated*c.correlated) + c.sampling2) }
