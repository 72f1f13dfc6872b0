package engine

import (
	"math"
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// A sensitivity of 10 uV/(W/m2) at 20 degrees C that grows by 0.1 % a kelvin is 10.1 at 30: 10.1 mV are then 1000 W/m2. The instrument's own
// thermometer goes before the air; without either the certificate's value holds.
func TestTemperatureResponse(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		name      string
		body, air float64
		want      float64
	}{
		{"at the reference", 20, nan, 1010},
		{"own thermometer", 30, 0, 1000},
		{"air where it has none", nan, 30, 1000},
		{"neither", nan, nan, 1010},
	} {
		in := rules.Instrument{ID: "G1", Measures: rules.Global, Primary: true, Input: rules.Input{Signal: "g", SignalUnit: "mV", SignalMin: nan, SignalMax: nan},
			Calibrations: []rules.Calibration{{SensitivityUVPerW: 10, K2: 1, TemperatureCoeff: []float64{0.001}}}}
		if !math.IsNaN(c.body) {
			in.Input.Case = "b"
		}
		st := &rules.Station{ID: "warm", LatitudeDeg: 0, Limits: rules.DefaultLimits(), Instruments: []rules.Instrument{in},
			Weather: []rules.WeatherInput{{Quantity: rules.AirTemperature, Channel: "a", Unit: "degC"}}}
		p, err := NewPlan(st)
		if err != nil {
			t.Fatal(err)
		}
		g := minute.NewGatherer(p.Layout())
		batch := minute.Batch{}
		r := minute.Reading{At: 12 * 60 * minute.MicrosPerMinute}
		for name, v := range map[string]float64{"g": 10.1, "a": c.air, "b": c.body} {
			if !math.IsNaN(v) {
				r.Values = append(r.Values, minute.ChannelValue{Channel: name, Value: minute.Single(v)})
			}
		}
		batch.Append(&r)
		b := minute.NewBlock(0, len(p.Layout().Channels))
		g.Fill(b, &batch, 0, minute.PerDay)
		j := p.NewJudged(0)
		p.Prepare(j, b, 0, b.Rows)
		if got := j.Series[0].Measured[12*60]; math.Abs(got-c.want) > 0.02 {
			t.Errorf("%s: %.3f W/m2, want %.0f within 0.02", c.name, got, c.want)
		}
	}
}
