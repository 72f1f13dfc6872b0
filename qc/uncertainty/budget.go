package uncertainty

import (
	"math"

	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

// Conditions are what a minute's uncertainty depends on. All are finite; NaN stands for not known where that is said.
type Conditions struct {
	Value     float64 // in the quantity's unit; NaN gives NaN
	SD        float64 // of the samples in the minute, the quantity's unit; NaN where there is none
	N         uint32  // samples in the minute
	Years     float64 // since the calibration; NaN where its date is not known
	BeamWm2   float64 // direct normal irradiance; NaN counts as none
	CosZenith float64 // of the apparent sun, 0 below the horizon
	NetWm2    float64 // net longwave: of a pyrgeometer its own signal, else that of one beside it; NaN where not known
	BodyC     float64 // of a pyrgeometer; NaN where not known
	DomeC     float64 // of a pyrgeometer; NaN where not measured
}

// A driver is what a term grows with.
type driver uint8

const (
	byNothing      driver = iota // a constant in the quantity's unit
	byValue                      // the value
	byValueYears                 // the value times the years since the calibration
	byBeam                       // the beam
	byBeamAslant                 // the beam times the sine of the zenith angle
	bySky                        // what does not come from the beam
	byInfrared                   // net longwave as a share of 200 W/m2; the whole where it is not known
	byNet                        // a pyrgeometer's net signal
	byNetYears                   // the same times the years since the calibration
	byEmission                   // sigma Tb^4
	byBodyKelvin                 // sigma Tb^4 for a kelvin of the body: 4 sigma Tb^3
	byDomeKelvin                 // 4 sigma Td^3
	byDomeExchange               // sigma (Td^4 - Tb^4)
	byClearness                  // net longwave as a share of a clear sky's 100 W/m2, not more than the whole
	driverCount    = iota
)

// A term is one component before the minute is known.
type term struct {
	name         string
	by           driver
	limit        float64 // in units of the driver
	distribution Distribution
	source       string
}

// A Budget is all components of one instrument under one calibration. It is read only and may be shared.
type Budget struct {
	Class string // what was assumed of the instrument as a whole, in words

	quantity rules.Quantity
	terms    []term
	square   [driverCount]float64 // sums of squared standard uncertainties a unit of the driver
}

// A Component is one row of a minute's budget.
type Component struct {
	Name         string
	Standard     float64 // standard uncertainty in the quantity's unit
	Distribution Distribution
	Source       string
}

// YearsAssumed is the age of a calibration whose date is not known: instruments are calibrated every second year (common practice).
const YearsAssumed = 2

// standardMax bounds what is returned: its square is finite.
const standardMax = 1e150

// NewBudget compiles the components of an instrument of a radiation quantity. Cal is the calibration that holds, nil where the site file
// states none.
func NewBudget(in *rules.Instrument, cal *rules.Calibration) *Budget {
	b := &Budget{quantity: in.Measures}
	if cal == nil {
		cal = &rules.Calibration{K2: 1}
	}
	switch {
	case in.Measures.Longwave():
		b.pyrgeometer(in, cal)
	case in.Measures == rules.UV || in.Measures == rules.PAR:
		b.spectral(in, cal)
	case in.Measures == rules.Direct:
		b.pyrheliometer(in, cal)
	default:
		b.pyranometer(in, cal)
	}
	for i := range b.terms {
		t := &b.terms[i]
		u := t.distribution.Standard(t.limit)
		b.square[t.by] += float64(u * u)
	}
	return b
}

func (b *Budget) add(name string, by driver, limit float64, d Distribution, source string) {
	b.terms = append(b.terms, term{name, by, limit, d, source})
}

// Standard gives the combined standard uncertainty of a minute in the quantity's unit: NaN for a value that is not there, else finite and
// not negative. It is what Components combine to, without a row for each.
func (b *Budget) Standard(c *Conditions) float64 {
	if c.Value != c.Value {
		return math.NaN()
	}
	variance := 0.0
	if b.quantity.Longwave() {
		variance = b.longwave(c)
	} else {
		variance = b.shortwave(c)
	}
	if c.N > 1 && c.SD == c.SD {
		variance += float64(c.SD*c.SD) / float64(c.N)
	}
	if !(variance < standardMax*standardMax) {
		return standardMax // beyond any radiation
	}
	return math.Sqrt(variance)
}

// U95 gives the expanded uncertainty, k=2, in the quantity's unit; NaN for a value that is not there.
func (b *Budget) U95(c *Conditions) float64 { return Coverage * b.Standard(c) }

// OffsetCorrected gives the expanded uncertainty, k=2, of a value whose thermal offset was taken out by the net longwave beside it: what the
// class allows of zero offset a stays by half, for night and day differ (Sanchez et al. 2015, JTECH 32, 234; the half is own choice), and the
// standard uncertainty of the offset itself, W/m2, comes to it.
func (b *Budget) OffsetCorrected(c *Conditions, standardWm2 float64) float64 {
	u := b.Standard(c)
	infrared := 1.0
	if c.NetWm2 == c.NetWm2 {
		infrared = c.NetWm2 * (1 / infraredOfClassWm2)
	}
	gone := float64(float64(infrared*infrared) * b.square[byInfrared] * (1 - float64(zeroCorrectedShare*zeroCorrectedShare)))
	return Coverage * math.Sqrt(max(0, float64(u*u)-gone)+float64(standardWm2*standardWm2))
}

func (b *Budget) shortwave(c *Conditions) float64 {
	v, years, beam := math.Abs(c.Value), known(c.Years, YearsAssumed), b.beam(c)
	mu := c.CosZenith
	sky := v - float64(beam*mu)
	if sky < 0 {
		sky = 0
	}
	infrared := 1.0
	if c.NetWm2 == c.NetWm2 {
		infrared = c.NetWm2 * (1 / infraredOfClassWm2)
	}
	s := &b.square
	return s[byNothing] + float64(float64(v*v)*(s[byValue]+float64(float64(years*years)*s[byValueYears]))) +
		float64(float64(beam*beam)*(s[byBeam]+float64((1-float64(mu*mu))*s[byBeamAslant]))) +
		float64(float64(sky*sky)*s[bySky]) + float64(float64(infrared*infrared)*s[byInfrared])
}

// infraredOfClassWm2 is the net longwave that the classes state zero offset a for.
const infraredOfClassWm2 = 200.0

func (b *Budget) longwave(c *Conditions) float64 {
	var l longwaveState
	b.longwaveOf(c, &l)
	years := known(c.Years, YearsAssumed)
	s := &b.square
	return s[byNothing] + float64(float64(l.net*l.net)*(s[byNet]+float64(float64(years*years)*s[byNetYears]))) +
		float64(float64(l.beam*l.beam)*s[byBeam]) + float64(float64(l.body*l.body)*s[byEmission]) +
		float64(float64(l.bodyKelvin*l.bodyKelvin)*s[byBodyKelvin]) + float64(float64(l.domeKelvin*l.domeKelvin)*s[byDomeKelvin]) +
		float64(float64(l.exchange*l.exchange)*s[byDomeExchange]) + float64(float64(l.clearness*l.clearness)*s[byClearness])
}

// A longwaveState is what a pyrgeometer's components grow with, W/m2 and W/(m2 K).
type longwaveState struct{ net, beam, body, bodyKelvin, domeKelvin, exchange, clearness float64 }

// What is assumed of a pyrgeometer whose net signal or body temperature is not known, since the logger converts: a clear sky, a ground that
// is warmer than the instrument, and 15 degrees C.
const (
	netDownAssumedWm2 = -100
	netUpAssumedWm2   = 30
	bodyAssumedC      = 15
	zeroCelsiusK      = 273.15
)

// longwaveOf fills a state in place: copying it back would cost as much as working it out.
func (b *Budget) longwaveOf(c *Conditions, l *longwaveState) {
	l.beam = b.beam(c)
	if l.net = c.NetWm2; l.net != l.net {
		if l.net = netDownAssumedWm2; b.quantity == rules.LWUp {
			l.net = netUpAssumedWm2
		}
	}
	l.body, l.bodyKelvin = emission(known(c.BodyC, bodyAssumedC))
	l.domeKelvin = l.bodyKelvin
	if c.DomeC == c.DomeC {
		dome, domeKelvin := emission(c.DomeC)
		l.domeKelvin, l.exchange = domeKelvin, dome-l.body
	}
	if l.clearness = math.Abs(l.net) * (1 / clearNetWm2); l.clearness > 1 {
		l.clearness = 1
	}
}

// clearNetWm2 is the net longwave under a clear sky, roughly (common practice).
const clearNetWm2 = 100.0

// emission is a black body's flux at a temperature, W/m2, and how much it grows for a kelvin; nothing under absolute zero.
func emission(temperatureC float64) (flux, perKelvin float64) {
	k := temperatureC + zeroCelsiusK
	if k < 0 {
		k = 0
	}
	cubed := float64(sensor.StefanBoltzmann * k * k * k)
	return float64(cubed * k), float64(4 * cubed)
}

func known(v, otherwise float64) float64 {
	if v != v {
		return otherwise
	}
	return v
}

// beam is the beam that reaches the instrument: a shaded one sees none, nor does one that looks down.
func (b *Budget) beam(c *Conditions) float64 {
	if !(c.BeamWm2 > 0) || b.quantity == rules.Diffuse || b.quantity == rules.Reflected {
		return 0
	}
	return c.BeamWm2
}

// Components gives the rows of a minute's budget, in the order of a table. Their root sum of squares is Standard.
func (b *Budget) Components(c *Conditions) []Component {
	drivers := b.drivers(c)
	rows := make([]Component, 0, len(b.terms)+1)
	for i := range b.terms {
		t := &b.terms[i]
		rows = append(rows, Component{t.name, t.distribution.Standard(t.limit) * drivers[t.by], t.distribution, t.source})
	}
	if c.N > 1 && c.SD == c.SD {
		rows = append(rows, Component{"sampling of the minute", math.Abs(c.SD) / math.Sqrt(float64(c.N)), Measured,
			"standard deviation of the samples over the root of their number"})
	}
	return rows
}

// drivers are what the terms are multiplied by.
func (b *Budget) drivers(c *Conditions) (d [driverCount]float64) {
	years := known(c.Years, YearsAssumed)
	v, beam := math.Abs(c.Value), b.beam(c)
	d[byNothing], d[byValue], d[byValueYears] = 1, v, v*years
	d[byBeam], d[byBeamAslant] = beam, beam*math.Sqrt(math.Max(0, 1-float64(c.CosZenith*c.CosZenith)))
	d[bySky] = math.Max(0, v-float64(beam*c.CosZenith))
	d[byInfrared] = 1
	if c.NetWm2 == c.NetWm2 {
		d[byInfrared] = math.Abs(c.NetWm2) / infraredOfClassWm2
	}
	if b.quantity.Longwave() {
		var l longwaveState
		b.longwaveOf(c, &l)
		d[byNet], d[byNetYears], d[byEmission] = math.Abs(l.net), math.Abs(l.net)*years, l.body
		d[byBodyKelvin], d[byDomeKelvin], d[byDomeExchange], d[byClearness] = l.bodyKelvin, l.domeKelvin, math.Abs(l.exchange), l.clearness
	}
	return d
}
