package engine

import (
	"fmt"
	"time"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// A Plan is what one station's rules come to: which channels feed which series, and how. It is read only and may be
// shared.
type Plan struct {
	Station *rules.Station
	layout  minute.Layout
	series  []seriesPlan
	// where the primary series of each quantity stands, -1 if there is none
	primary [rules.QuantityCount]int
}

// A seriesPlan is how one series is made from channels.
type seriesPlan struct {
	id         string
	quantity   rules.Quantity
	primary    bool
	class      string
	instrument *rules.Instrument // nil for weather
	weather    *rules.WeatherInput
	signal     int // block columns; -1 where there is none
	bodyCol    int
	domeCol    int
}

// NewPlan compiles a station that has passed rules.Parse. It errs only where the station contradicts itself.
func NewPlan(st *rules.Station) (*Plan, error) {
	p := &Plan{Station: st}
	p.layout.LabelEnd, p.layout.Interval = st.Time.LabelEnd, st.Time.Interval
	if p.layout.Interval <= 0 {
		p.layout.Interval = time.Minute
	}
	columns := map[string]int{}
	column := func(channel string) int {
		if channel == "" {
			return -1
		}
		if i, ok := columns[channel]; ok {
			return i
		}
		columns[channel] = len(p.layout.Channels)
		p.layout.Channels = append(p.layout.Channels, channel)
		return columns[channel]
	}
	for i := range p.primary {
		p.primary[i] = -1
	}
	counts := [rules.QuantityCount]int{}
	for i := range st.Instruments {
		counts[st.Instruments[i].Measures]++
	}
	for i := range st.Instruments {
		in := &st.Instruments[i]
		s := seriesPlan{id: in.ID, quantity: in.Measures, class: in.Class, instrument: in, primary: in.Primary || counts[in.Measures] == 1,
			bodyCol: column(in.Input.Case), domeCol: column(in.Input.Dome)}
		if in.Input.Irradiance != "" {
			s.signal = column(in.Input.Irradiance)
		} else {
			s.signal = column(in.Input.Signal)
		}
		if err := p.add(s); err != nil {
			return nil, err
		}
	}
	for i := range st.Weather {
		w := &st.Weather[i]
		s := seriesPlan{id: w.Channel, quantity: w.Quantity, weather: w, primary: true, signal: column(w.Channel), bodyCol: -1, domeCol: -1}
		if err := p.add(s); err != nil {
			return nil, err
		}
	}
	for i := range st.Housekeeping {
		column(st.Housekeeping[i].Channel)
	}
	return p, nil
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
	p.series = append(p.series, s)
	return nil
}

// Layout is how the station's stamps become minutes and which channels the judge reads.
func (p *Plan) Layout() minute.Layout { return p.layout }
