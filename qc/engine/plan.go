package engine

import (
	"fmt"
	"math"
	"slices"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sun"
	"fluxwarden/qc/uncertainty"
	"fluxwarden/rules"
)

// A Plan is what one station's rules come to: which channels feed which series, and how. It is read only and may be
// shared.
type Plan struct {
	Station *rules.Station

	layout      minute.Layout
	site        sun.Site
	horizon     *sun.Horizon // nil is a flat horizon
	pressureHPa float64      // of the standard atmosphere at the station
	series      []seriesPlan
	primary     [rules.QuantityCount]int // where the primary series of each quantity stands, -1 if there is none
	secondary   [rules.QuantityCount]int // where the first series beside the primary stands, -1 if there is none
	best        []bestPlan
	house       housePlan
	local       localPlan
	offsets     []int           // series whose thermal offset is taken out
	nothing     []float64       // a column without a value
	passes      []rules.Outcome // a column of passes
	setup       *fault.Setup
	notes       *rules.NoteBook
	base        *Plan  // without notes
	skyColumns  [4]int // block columns of live aerosol, water, ozone and albedo; -1 where there is none
}

// A seriesPlan is how one series is made from channels.
type seriesPlan struct {
	id            string
	quantity      rules.Quantity
	primary       bool
	secondary     bool              // the first beside the primary of its quantity
	instrument    *rules.Instrument // nil for weather
	weather       *rules.WeatherInput
	signal        int // block columns; -1 where there is none
	bodyCol       int
	domeCol       int
	statusCol     int
	microvolts    float64 // in one unit of the signal
	periods       []calibrationPeriod
	unstated      *uncertainty.Budget // where no calibration is stated; nil where the value is absent then
	tests         rules.TestSet
	zeroAllowance float64 // how far below nothing a sound one may read, W/m2
}

// NewPlan compiles a station that has passed rules.Parse. It errs only where the station contradicts itself.
func NewPlan(st *rules.Station) (*Plan, error) {
	p := &Plan{Station: st, site: sun.Site{LatitudeDeg: st.LatitudeDeg, LongitudeDeg: st.LongitudeDeg, ElevationM: st.ElevationM},
		pressureHPa: StandardPressure(st.ElevationM), nothing: make([]float64, minute.PerDay)}
	fillNaN(p.nothing)
	p.passes = slices.Repeat([]rules.Outcome{rules.Pass}, minute.PerDay)
	p.layout.LabelEnd, p.layout.Interval = st.Time.LabelEnd, st.Time.Interval
	if p.layout.Interval <= 0 {
		p.layout.Interval = time.Minute
	}
	if len(st.Horizon) > 0 {
		points := make([][2]float64, len(st.Horizon))
		for i, h := range st.Horizon {
			points[i] = [2]float64{h.AzimuthDeg, h.ElevationDeg}
		}
		h, err := sun.NewHorizon(points)
		if err != nil {
			return nil, fmt.Errorf("station %s: horizon: %w", st.ID, err)
		}
		p.horizon = &h
	}
	for i := range p.primary {
		p.primary[i], p.secondary[i] = -1, -1
	}
	if err := p.addInstruments(); err != nil {
		return nil, err
	}
	for i := range st.Weather {
		w := &st.Weather[i]
		s := seriesPlan{id: w.Channel, quantity: w.Quantity, weather: w, primary: true, signal: p.column(w.Channel), bodyCol: -1, domeCol: -1, statusCol: -1}
		if err := p.add(s); err != nil {
			return nil, err
		}
	}
	p.pairUp()
	p.planHouse()
	p.planOffsets()
	p.planLocal()
	for i, c := range [...]string{st.Sky.Channels.AOD, st.Sky.Channels.WaterCm, st.Sky.Channels.OzoneCm, st.Sky.Channels.Albedo} {
		p.skyColumns[i] = p.column(c)
	}
	p.setup = p.faultSetup()
	p.base = p
	return p, nil
}

// WithNotes is the plan with the station's notes, withdrawn ones and withdrawals among them, instead of those it had. It shares all else.
func (p *Plan) WithNotes(all []rules.Note) *Plan {
	book := rules.NewNoteBook(all)
	if book == nil {
		return p.base
	}
	q, setup := *p.base, *p.base.setup
	setup.Notes = book
	q.setup, q.notes = &setup, book
	return &q
}

// Base is the plan without notes. Columns made by one of a plan and its forms with notes fit the others.
func (p *Plan) Base() *Plan { return p.base }

func (p *Plan) addInstruments() error {
	counts := [rules.QuantityCount]int{}
	for i := range p.Station.Instruments {
		counts[p.Station.Instruments[i].Measures]++
	}
	for i := range p.Station.Instruments {
		in := &p.Station.Instruments[i]
		signal := in.Input.Irradiance
		if signal == "" {
			signal = in.Input.Signal
		}
		err := p.add(seriesPlan{id: in.ID, quantity: in.Measures, instrument: in, primary: in.Primary || counts[in.Measures] == 1,
			signal: p.column(signal), bodyCol: p.column(in.Input.Case), domeCol: p.column(in.Input.Dome), statusCol: p.column(in.Status),
			microvolts: signalMicrovolts(in.Input.SignalUnit), periods: periodsOf(in), unstated: unstatedBudget(in),
			zeroAllowance: limit.NightZeroAllowance(in.Class, in.Measures, &p.Station.Limits)})
		if err != nil {
			return err
		}
	}
	return nil
}

// column gives the block column of a channel, adding it if it is new; -1 for no channel.
func (p *Plan) column(channel string) int {
	if channel == "" {
		return -1
	}
	for i, c := range p.layout.Channels {
		if c == channel {
			return i
		}
	}
	p.layout.Channels = append(p.layout.Channels, channel)
	return len(p.layout.Channels) - 1
}

func (p *Plan) add(s seriesPlan) error {
	if s.signal < 0 {
		return fmt.Errorf("station %s: instrument %s: no channel to read; give it input.signal or input.irradiance", p.Station.ID, s.id)
	}
	if s.primary {
		if k := p.primary[s.quantity]; k >= 0 {
			return fmt.Errorf("station %s: %s: both %s and %s are primary; mark one of them primary: true", p.Station.ID, s.quantity, p.series[k].id, s.id)
		}
		p.primary[s.quantity] = len(p.series)
	}
	s.tests = testsOf(s.quantity)
	p.series = append(p.series, s)
	return nil
}

// faultSetup is what the diagnosis needs to know of the station.
func (p *Plan) faultSetup() *fault.Setup {
	u := &fault.Setup{Station: p.Station.ID, GapMinutes: int64(p.Station.Limits.GapMinutes), LatitudeDeg: p.Station.LatitudeDeg,
		PressureHPa: p.pressureHPa, Sky: skySetup(p.Station, p.pressureHPa)}
	for q := range rules.Quantity(rules.RadiationCount) {
		k := p.primary[q]
		if k < 0 {
			continue
		}
		s := &p.series[k]
		in := fault.Instrument{ID: s.id, Class: s.instrument.Class, Present: true, HasBody: s.bodyCol >= 0, SensitivityUVPerW: 1}
		if s.instrument.Input.Irradiance == "" && len(s.instrument.Calibrations) > 0 {
			in.SensitivityUVPerW = s.instrument.Calibrations[len(s.instrument.Calibrations)-1].SensitivityUVPerW
			in.Volts = true
		}
		u.Instruments[q] = in
	}
	p.house.tell(p, u)
	return u
}

// Layout is how the station's stamps become minutes and which channels the judge reads.
func (p *Plan) Layout() minute.Layout { return p.layout }

// NewJudged makes the columns of a day, with its sun worked out and no row known yet. It is the costly part of a day that needs
// nothing else, and may be called for many days at the same time.
func (p *Plan) NewJudged(day int64) *Judged { return newJudged(p, day) }

// Reset makes the columns of a judged day ready for another day of the same plan.
func (p *Plan) Reset(j *Judged, day int64) { j.reset(p, day) }

func fillNaN(s []float64) {
	nan := math.NaN()
	for i := range s {
		s[i] = nan
	}
}
