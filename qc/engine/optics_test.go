package engine

import (
	"fmt"
	"math"
	"testing"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"

	"pgregory.net/rapid"
)

const opticsText = networkText + `
  - id: optics
    latitude: 46.8
    longitude: 9.1
    elevation: 480
    instruments:
      - {id: G1, measures: global, class: A, directional: [[0, 1], [20, 0.98], [90, 0.98]], input: {irradiance: g1}}
      - {id: B1, measures: direct, class: A, field_of_view: 5, window: quartz, input: {irradiance: b1}}
      - {id: D1, measures: diffuse, class: A, shade_ring: [1.1], input: {irradiance: d1}}
      - {id: L1, measures: lw_down, input: {signal: l1, unit: mV, case: c1, case_unit: ohm_10k}, calibrations: [{from: 2020-01-01, sensitivity: 4, unit: uV/(W/m2)}]}
    weather: {air_temperature: ta, humidity: rh}
`

func TestOpticsAreCorrected(t *testing.T) {
	j := settled(t, opticsText, map[string]float64{"g1": 890, "b1": 850, "d1": 120, "l1": -0.3, "c1": 12000, "ta": 20, "rh": 50})
	g, d := j.Primary(rules.Global), j.Primary(rules.Diffuse)
	if want := RoundIrradiance(120 * 1.1); d.Value[noon] != want || d.AsSent()[noon] != 120 {
		t.Errorf("diffuse %v as sent %v, want %v", d.Value[noon], d.AsSent()[noon], want)
	}
	// The sun stands 23.4 degrees from the zenith: the table says that the beam reads 2 % low.
	if want := RoundIrradiance(890 + 0.02*850*j.CosZenith[noon]); math.Abs(g.Value[noon]-want) > 1.0/32 || g.AsSent()[noon] != 890 {
		t.Errorf("global %v as sent %v, want %v", g.Value[noon], g.AsSent()[noon], want)
	}
	for zenith, want := range map[float64]float64{-5: 1, 0: 1, 10: 0.99, 20: 0.98, 55: 0.98, 95: 0.98} {
		if got := responseAt([][2]float64{{0, 1}, {20, 0.98}, {90, 0.98}}, zenith); math.Abs(got-want) > 1e-12 {
			t.Errorf("response at %v is %v, want %v", zenith, got, want)
		}
	}
}

func TestMonthOf(t *testing.T) {
	for day := int64(0); day < 30000; day++ {
		if got, want := monthOf(day), int(time.Unix(86400*day, 0).UTC().Month())-1; got != want {
			t.Fatalf("day %d: %d, want %d", day, got, want)
		}
	}
}

// A thermistor that is open or shorted is named; the flux is not known.
func TestBrokenThermistorIsNamed(t *testing.T) {
	row := func(ohm float64) map[string]float64 {
		return map[string]float64{"l1": -0.3, "c1": ohm, "ta": 20, "rh": 50}
	}
	j := settled(t, opticsText, row(12000), row(0), row(1e9), row(-12000), row(300), map[string]float64{"l1": -0.3, "ta": 20})
	l := j.Primary(rules.LWDown)
	for i, want := range []struct {
		signal  rules.Outcome
		verdict rules.Verdict
	}{{rules.Pass, rules.Accepted}, {rules.Miss, rules.Absent}, {rules.Miss, rules.Absent}, {rules.Miss, rules.Absent},
		{rules.Miss, rules.Absent}, // 140 degrees C: no body is as warm
		{rules.NoValue, rules.Absent}} {
		if r := noon + i; l.Outcomes[rules.Signal][r] != want.signal || l.Verdict[r] != want.verdict {
			t.Errorf("row %d: signal %v verdict %v, want %+v; body %v measured %v missed %s", i, l.Outcomes[rules.Signal][r], l.Verdict[r], want, l.bodyC[r], l.Measured[r], l.Missed[r].Join(";"))
		}
	}
}

// Whatever one channel sends, what is not there never spreads: the values and their uncertainties of the instruments that do not read it stay
// there. What may change is what holds two quantities against each other.
func TestNothingSpreadsToANeighbour(t *testing.T) {
	p := planOf(t, opticsText)
	day := dayOf(t, "2026-06-21")
	reads := map[string]rules.Quantity{"b1": rules.Direct, "d1": rules.Diffuse, "l1": rules.LWDown, "c1": rules.LWDown, "ta": rules.AirTemperature, "rh": rules.Humidity}
	channels := []string{"b1", "d1", "l1", "c1", "ta", "rh"}
	sound := map[string]float64{"g1": 890, "b1": 850, "d1": 120, "l1": -0.3, "c1": 12000, "ta": 20, "rh": 50}
	rapid.Check(t, func(rt *rapid.T) {
		bad := rapid.SampledFrom(channels).Draw(rt, "channel")
		value := rapid.OneOf(rapid.Float64(), rapid.SampledFrom([]float64{math.NaN(), math.Inf(1), math.Inf(-1), -9999, 0, -1e-300, 1e300})).Draw(rt, "value")
		b := &minute.Batch{}
		r := minute.Reading{At: minute.Stamp(day*minute.PerDay+noon) * minute.MicrosPerMinute}
		for _, c := range p.layout.Channels {
			v := sound[c]
			if c == bad {
				v = value
			}
			r.Values = append(r.Values, minute.ChannelValue{Channel: c, Value: minute.Single(v)})
		}
		b.Append(&r)
		judger := NewJudger(p, nil)
		j := judger.Begin(day)
		judger.Advance(blockOf(p, b, day))
		Settle(p, j, []fault.Episode{})
		for i := range j.Series {
			s := &j.Series[i]
			if s.Quantity == reads[bad] {
				continue
			}
			if v := s.Value[noon]; math.IsNaN(v) || math.IsInf(v, 0) || s.Verdict[noon] == rules.Absent {
				rt.Fatalf("%s is %v (%v) because %s sends %v", s.Instrument, v, s.Verdict[noon], bad, value)
			}
			if u := s.U95[noon]; int(s.Quantity) < rules.RadiationCount && !(u >= 0 && u < 1e6) {
				rt.Fatalf("%s has U95 %v because %s sends %v", s.Instrument, u, bad, value)
			}
		}
		if best := j.BestOf(rules.Global); best.Source[noon] == rules.NoSource || math.IsNaN(best.Value[noon]) {
			rt.Fatal(fmt.Sprint("no best global because ", bad, " sends ", value))
		}
	})
}
