package engine

import (
	"math"
	"testing"

	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

// calibratedText has a calibration that changes within a day and within a minute, an end and nothing after it, and the same sensitivity of
// 10 uV/(W/m2) read in three units.
const calibratedText = networkText + `
  - id: calibrated
    name: Calibrated
    latitude: 0
    longitude: 0
    elevation: 0
    time: {label: start, interval: 60s}
    instruments:
      - id: G1
        measures: global
        class: A
        primary: true
        input: {signal: g1_mv, unit: mV}
        calibrations:
          - {from: 2026-03-20T06:00:00Z, to: 2026-03-20T12:00:00Z, sensitivity: 10, unit: uV/(W/m2)}
          - {from: 2026-03-20T12:00:00Z, to: 2026-03-20T15:00:00Z, sensitivity: 8, unit: uV/(W/m2)}
      - {id: G2, measures: global, class: A, input: {signal: g2_uv, unit: uV}, calibrations: [{from: 2020-01-01, sensitivity: 10, unit: uV/(W/m2)}]}
      - {id: G3, measures: global, class: A, input: {signal: g3_v, unit: V}, calibrations: [{from: 2020-01-01, sensitivity: 10, unit: uV/(W/m2)}]}
      - {id: L1, measures: lw_down, input: {signal: l1_mv, unit: mV, case: case_c}, calibrations: [{from: 2020-01-01, sensitivity: 4, unit: uV/(W/m2)}]}
      - {id: L2, measures: lw_up, input: {signal: l2_mv, unit: mV, case: case2_c, dome: dome2_c}, calibrations: [{from: 2020-01-01, sensitivity: 4, unit: uV/(W/m2), k1: 0, k2: 1, k3: 4}]}
    weather: {air_temperature: {channel: ta_k, unit: K}, humidity: {channel: rh_1, unit: "1"}, pressure: {channel: p_pa, unit: Pa}}
`

// TestCalibrationOfTheMinute: the calibration that holds at a minute's start is used; where none holds the value is absent.
func TestCalibrationOfTheMinute(t *testing.T) {
	p := planOf(t, calibratedText)
	in := map[int]map[string]float64{}
	for m := range minute.PerDay {
		in[m] = map[string]float64{"g1_mv": 4}
	}
	g := &judgedMinutes(t, p, equinox, in).Series[0]
	for r, want := range map[int]float64{0: math.NaN(), 359: math.NaN(), 360: 400, 719: 400, 720: 500, 899: 500, 900: math.NaN(), 1439: math.NaN()} {
		got := g.Measured[r]
		if got != want && !(math.IsNaN(got) && math.IsNaN(want)) {
			t.Errorf("minute %d: %v W/m2, want %v", r, got, want)
		}
		if math.IsNaN(want) != (g.Verdict[r] == rules.Absent) || math.IsNaN(want) != (g.N[r] == 0) {
			t.Errorf("minute %d: %v, n %d", r, g.Verdict[r], g.N[r])
		}
	}
}

// TestUnits: one irradiance, three units of the voltage; weather in the units that loggers send. The longwave is the worked value of
// Albrecht & Cox 1977: -400 uV at 4 uV/(W/m2), body 288.15 K: 290.9185 W/m2; with the dome half a kelvin colder and k 4: 301.7435.
func TestUnits(t *testing.T) {
	p := planOf(t, calibratedText)
	j := judgedMinutes(t, p, equinox, map[int]map[string]float64{700: {"g1_mv": 8.5, "g2_uv": 8500, "g3_v": 0.0085, "l1_mv": -0.4, "case_c": 15, "l2_mv": -0.4,
		"case2_c": 15, "dome2_c": 14.5, "ta_k": 288.15, "rh_1": 0.55, "p_pa": 101325}})
	for i, want := range []float64{850, 850, 850, 290.9185, 301.7435, 15, 55, 1013.25} {
		if got := j.Series[i].Measured[700]; math.Abs(got-want) > 0.5/irradiancePerWm2+1e-4 {
			t.Errorf("%s: %v, want %v", j.Series[i].Instrument, got, want)
		}
		if j.Series[i].Verdict[700] != rules.Accepted && i != 4 { // ground 14 K colder than the air is questioned
			t.Errorf("%s: %v (%s)", j.Series[i].Instrument, j.Series[i].Verdict[700], j.Series[i].Missed[700].Join(" "))
		}
	}
	s := &j.Series[0]
	if s.Min[700] != 850 || s.Max[700] != 850 || !math.IsNaN(s.SD[700]) || s.N[700] != 1 {
		t.Errorf("min %v max %v sd %v n %d of one sample", s.Min[700], s.Max[700], s.SD[700], s.N[700])
	}
}

// TestScaleIsTheRadiometer: the straight line that rows are converted by is sensor.Radiometer.
func TestScaleIsTheRadiometer(t *testing.T) {
	for _, mV := range []float64{-0.03, 0, 1.234, 9.87654321} {
		r := sensor.Radiometer{SensitivityUVPerWm2: 8.62, ZeroOffsetWm2: -1.5}
		c := scale{1000, 8.62, 1.5}
		if got, want := c.of(mV), r.Irradiance(mV, 0); got != want {
			t.Errorf("%v mV: %v, want %v", mV, got, want)
		}
	}
}

// TestStatisticsAreConverted: the spread and the range of a minute follow the mean, a pyrgeometer's too; a range is never upside down.
func TestStatisticsAreConverted(t *testing.T) {
	p := planOf(t, calibratedText)
	day := dayOf(t, equinox)
	var b minute.Batch
	b.Append(&minute.Reading{At: minute.Stamp(day*minute.PerDay+700) * minute.MicrosPerMinute, Values: []minute.ChannelValue{
		{Channel: "g1_mv", Value: minute.Value{Mean: 5, SD: 0.1, Min: 4, Max: 6, N: 60}},
		{Channel: "l1_mv", Value: minute.Value{Mean: -0.4, SD: 0.04, Min: -0.48, Max: -0.32, N: 60}},
		{Channel: "case_c", Value: minute.Single(15)}}})
	block := blockOf(p, &b, day)
	j := p.NewJudged(day)
	p.Prepare(j, block, 0, block.Rows)
	g, l := &j.Series[0], j.Primary(rules.LWDown)
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"global mean", g.Measured[700], 500}, {"global sd", g.SD[700], 10}, {"global min", g.Min[700], 400}, {"global max", g.Max[700], 600},
		{"longwave sd", l.SD[700], 10}, {"longwave min", l.Min[700], 270.9185}, {"longwave max", l.Max[700], 310.9185},
	} {
		if math.Abs(c.got-c.want) > 0.5/irradiancePerWm2+1e-4 {
			t.Errorf("%s: %v, want %v", c.name, c.got, c.want)
		}
	}
	if g.N[700] != 60 || l.N[700] != 60 {
		t.Errorf("n %d and %d, want 60", g.N[700], l.N[700])
	}
}

// TestWhatIsNotSent: marks, missing body temperatures, and a body that cannot be.
func TestWhatIsNotSent(t *testing.T) {
	p := planOf(t, calibratedText)
	j := judgedMinutes(t, p, equinox, map[int]map[string]float64{
		700: {"l1_mv": -0.4},                               // no body
		701: {"l1_mv": -0.4, "case_c": -7999},              // its mark
		702: {"l1_mv": -0.4, "case_c": 40, "ta_k": 283.15}, // 30 K above the air
		703: {"l2_mv": -0.4, "case2_c": 15},                // no dome, and k3 asks for one
		704: {"g2_uv": -7999}, 705: {"g2_uv": -7300},       // a mark, and a reversed thermopile
		706: {"g1_mv": -6999}, 707: {"g1_mv": math.MaxFloat64}, // a mark, and a number that no logger sends
	})
	lw, up, g1, g2 := j.Primary(rules.LWDown), j.Primary(rules.LWUp), &j.Series[0], &j.Series[1]
	for _, c := range []struct {
		name string
		s    *Series
		r    int
		want rules.Verdict
	}{
		{"no body temperature", lw, 700, rules.Absent}, {"a mark for the body", lw, 701, rules.Absent}, {"a body that cannot be", lw, 702, rules.Rejected},
		{"no dome temperature", up, 703, rules.Absent}, {"a mark in microvolts", g2, 704, rules.Absent}, {"a reversed thermopile", g2, 705, rules.Rejected},
		{"a mark in millivolts", g1, 706, rules.Absent}, {"the greatest number", g1, 707, rules.Absent},
	} {
		if c.s.Verdict[c.r] != c.want {
			t.Errorf("%s: %v, want %v", c.name, c.s.Verdict[c.r], c.want)
		}
	}
	if !lw.Missed[702].Has(rules.Signal) || g2.Outcomes[rules.Signal][704] != rules.Miss || lw.Outcomes[rules.Signal][700] != rules.NoValue {
		t.Error("signal does not say why")
	}
	soundRows(t, p, j)
	if !limit.IsMark(-7300) || minute.IsMark(-7300) {
		t.Error("what is a mark in millivolts is none in microvolts")
	}
}
