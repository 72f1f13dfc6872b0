package engine

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

const offsetText = networkText + `
  - id: nights
    latitude: 46.8
    longitude: 9.1
    elevation: 480
    instruments:
      - {id: G1, measures: global, class: A, input: {signal: g1_mv, unit: mV}, calibrations: [{from: 2020-01-01, sensitivity: 8.4, unit: uV/(W/m2)}]}
      - {id: B1, measures: direct, class: A, input: {signal: b1_mv, unit: mV}, calibrations: [{from: 2020-01-01, sensitivity: 7.9, unit: uV/(W/m2)}]}
      - {id: D1, measures: diffuse, class: A, input: {signal: d1_mv, unit: mV}, calibrations: [{from: 2020-01-01, sensitivity: 9.1, unit: uV/(W/m2)}]}
      - {id: L1, measures: lw_down, input: {signal: l1_mv, unit: mV, case: l1_case_c}, calibrations: [{from: 2020-01-01, sensitivity: 4.1, unit: uV/(W/m2)}]}
    weather: {air_temperature: ta_c, humidity: rh_pct, pressure: p_hpa}
`

// The invented pyranometers stand 2 W/m2 low under a clear sky with 75 W/m2 of net longwave and are sound under cloud: a slope of 2/70.
// From the second night on it is taken off, the measured value stays, and what the tests say stays.
func TestThermalOffsetIsLearntAtNight(t *testing.T) {
	p, without := planOf(t, offsetText), planOf(t, strings.NewReplacer("measures: global,", "measures: global, thermal_offset: false,", "measures: diffuse,", "measures: diffuse, thermal_offset: false,").Replace(offsetText))
	first := dayOf(t, "2026-03-23")
	batch := inventedDays(p, first, 5, 3, false)
	type night struct{ measured, value float64 }
	var nights []night
	var judged []*Judged
	judgeDays(p, NewJudger(p, nil), batch, first, 5, func(j *Judged, s DaySummary, _ []fault.Episode) {
		Settle(p, j, nil)
		g := j.Primary(rules.Global)
		var n night
		var count float64
		for r := range j.Rows {
			if j.ApparentZenithDeg[r] > offsetNightZenithDeg && g.Value[r] == g.Value[r] {
				n.measured, n.value, count = n.measured+g.Measured[r]*g.Measured[r], n.value+g.Value[r]*g.Value[r], count+1
			}
		}
		nights = append(nights, night{math.Sqrt(n.measured / count), math.Sqrt(n.value / count)})
		judged = append(judged, j)
		for _, f := range s.Offsets {
			if f.Fit != nil && (math.Abs(f.Fit.B1-2.0/70) > 0.004 || math.Abs(f.Fit.B0) > 0.3) {
				t.Errorf("day %d: %s fitted %+v", s.Day-first, f.Instrument, *f.Fit)
			}
		}
	})
	if nights[0].measured != nights[0].value {
		t.Error("something is taken off before any night was seen")
	}
	for i, n := range nights[1:] {
		if n.value > 0.5*n.measured {
			t.Errorf("night %d: root mean square %.2f W/m2 before and %.2f after", i+1, n.measured, n.value)
		}
	}
	k := 0
	judgeDays(without, NewJudger(without, nil), batch, first, 5, func(j *Judged, _ DaySummary, _ []fault.Episode) {
		Settle(without, j, nil)
		a, b := judged[k].Primary(rules.Global), j.Primary(rules.Global)
		for r := range j.Rows {
			if a.Measured[r] != b.Measured[r] && a.Measured[r] == a.Measured[r] || a.Missed[r] != b.Missed[r] || a.Verdict[r] != b.Verdict[r] || b.Value[r] != b.Measured[r] && b.Value[r] == b.Value[r] {
				t.Fatalf("day %d row %d: measured %v and %v, verdicts %v and %v", k, r, a.Measured[r], b.Measured[r], a.Verdict[r], b.Verdict[r])
			}
		}
		k++
	})
}

// Midsummer at 60 degrees north has no night below -10 degrees: the last fit is carried, and its uncertainty grows.
func TestThermalOffsetIsCarriedThroughTheSummer(t *testing.T) {
	p := planOf(t, strings.Replace(offsetText, "latitude: 46.8", "latitude: 61", 1))
	day := dayOf(t, "2026-06-21")
	batch := inventedDays(p, day, 1, 3, false)
	var u95 []float64
	for _, age := range []int64{1, 40, 120, offsetAgeMaxDays + 1} {
		fit := &OffsetFit{B0: -0.25, B1: 0.03125, SD: 0.5, Day: day - age}
		j := NewJudger(p, []DaySummary{{Day: day - 1, Offsets: []OffsetFacts{{Instrument: "G1", Fit: fit}}}})
		d := j.Begin(day)
		j.Advance(blockOf(p, batch, day))
		s := j.End()
		Settle(p, d, nil)
		g, l := d.Primary(rules.Global), d.Primary(rules.LWDown)
		const r = 700
		want := g.Measured[r]
		if age <= offsetAgeMaxDays {
			want = RoundIrradiance(g.Measured[r] - RoundIrradiance(-0.25+0.03125*quantised(l.net[r], 64)))
			u95 = append(u95, g.U95[r])
			if s.Offsets[0].Fit == nil || *s.Offsets[0].Fit != *fit || s.Offsets[0].Sums.N != 0 {
				t.Errorf("age %d: handed on %+v", age, s.Offsets[0])
			}
		}
		if g.Value[r] != want {
			t.Errorf("age %d: %v from %v, want %v", age, g.Value[r], g.Measured[r], want)
		}
	}
	if !(u95[0] <= u95[1] && u95[1] < u95[2]) {
		t.Errorf("uncertainty %v does not grow with age", u95)
	}
}

// A clear measured day of the US network (Colorado, 2016-01-01), taken twice: what its night teaches brings the night of both pyranometers
// nearer nothing (the diffuse has a black-and-white detector and stood there already) and does not spoil how the three close by day. The net longwave comes from the flux and the case temperature.
func TestThermalOffsetOfMeasuredDay(t *testing.T) {
	d := readNetworkDay(t, "slv16001")
	p := planOf(t, fmt.Sprintf(networkText+`
  - id: network
    latitude: %v
    longitude: %v
    elevation: %v
    time: {label: end, interval: 60s}
    instruments:
      - {id: G1, measures: global, class: B, thermal_offset: true, input: {irradiance: dw_solar}}
      - {id: B1, measures: direct, class: A, input: {irradiance: direct_n}}
      - {id: D1, measures: diffuse, class: A, thermal_offset: true, input: {irradiance: diffuse}}
      - {id: L1, measures: lw_down, input: {irradiance: dw_ir, case: dw_case, dome: dw_dome}}
`, d.lat, d.lon, d.elevM))
	twice := batchOf(d.at, d.values)
	for i := range d.at {
		r := twice.Reading(i)
		r.At += minute.PerDay * minute.MicrosPerMinute
		twice.Append(&r)
	}
	first := p.layout.Minute(d.at[700]) / minute.PerDay
	judgeDays(p, NewJudger(p, nil), twice, first, 2, func(j *Judged, s DaySummary, _ []fault.Episode) {
		if j.Day == first {
			return
		}
		Settle(p, j, nil)
		g, b, d := j.Primary(rules.Global), j.Primary(rules.Direct), j.Primary(rules.Diffuse)
		var night [4][]float64
		var closed [2][]float64
		for r := range j.Rows {
			switch mu := j.CosZenith[r]; {
			case g.Value[r] != g.Value[r] || d.Value[r] != d.Value[r] || b.Value[r] != b.Value[r]:
			case j.ApparentZenithDeg[r] > offsetNightZenithDeg:
				for k, v := range [...]float64{g.Measured[r], g.Value[r], d.Measured[r], d.Value[r]} {
					night[k] = append(night[k], math.Abs(v))
				}
			case j.ApparentZenithDeg[r] < 80:
				closed[0] = append(closed[0], math.Abs(g.Measured[r]-b.Value[r]*mu-d.Measured[r]))
				closed[1] = append(closed[1], math.Abs(g.Value[r]-b.Value[r]*mu-d.Value[r]))
			}
		}
		t.Logf("fit of global %+v", s.Offsets[0].Fit)
		t.Logf("night, median: |global| %.2f before and %.2f after, |diffuse| %.2f and %.2f; by day |closure| %.2f and %.2f W/m2", medianOf(night[0]), medianOf(night[1]),
			medianOf(night[2]), medianOf(night[3]), medianOf(closed[0]), medianOf(closed[1]))
		if !(medianOf(night[1]) < 0.5*medianOf(night[0])) || !(medianOf(night[3]) < medianOf(night[2])+0.2) || !(medianOf(closed[1]) < medianOf(closed[0])+1) {
			t.Error("the night is not brought to nothing, or the day is spoilt")
		}
	})
}

// A single overcast night cannot tell a slope, and a slope that no pyranometer has is not believed: two measured nights of which neither
// may be used (net longwave spreads by 2.3 and 2.5 W/m2 in each; least squares would give 0.05 and 1.44).
func TestThermalOffsetIsNotFittedToAnOvercastNight(t *testing.T) {
	for _, file := range []string{"plains_2019-01-01", "plains_2019-07-05"} {
		_, columns := readTable(t, "pyrgeometer/"+file+".csv.gz", time.RFC3339)
		var y, net []float64
		for i, v := range columns["global"] {
			if v < 0 {
				y, net = append(y, v), append(net, columns["lw_down_net"][i])
			}
		}
		if fit, err := sensor.FitThermalOffset(y, net, nil); err == nil {
			t.Errorf("%s: fitted %+v", file, fit)
		}
	}
}
