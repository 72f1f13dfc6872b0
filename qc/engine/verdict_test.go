package engine

import (
	"math"
	"testing"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// plainText is a station whose logger converts, so that a test can say what each instrument reads. At the equator on the day of an
// equinox the sun is overhead at about noon and below the horizon at midnight.
const plainText = networkText + `
  - id: plain
    name: Plain
    latitude: 0
    longitude: 0
    elevation: 0
    time: {label: start, interval: 60s}
    instruments:
      - {id: G1, measures: global, class: A, input: {irradiance: ghi}}
      - {id: B1, measures: direct, class: A, input: {irradiance: dni}}
      - {id: D1, measures: diffuse, class: A, input: {irradiance: dhi}}
      - {id: U1, measures: reflected, class: B, input: {irradiance: rsw}}
      - {id: L1, measures: lw_down, input: {irradiance: lwd}}
      - {id: L2, measures: lw_up, input: {irradiance: lwu}}
      - {id: V1, measures: uv, input: {irradiance: uv}}
      - {id: Q1, measures: par, input: {irradiance: par}}
    weather: {air_temperature: ta_c, humidity: rh_pct, pressure: p_hpa, wind_speed: ws_ms}
`

const equinox = "2026-03-20"

// judgedMinutes judges a day that has the given minutes, each with the given channels, and settles without episodes.
func judgedMinutes(t testing.TB, p *Plan, date string, readings map[int]map[string]float64) *Judged {
	t.Helper()
	day := dayOf(t, date)
	b := minute.Batch{}
	for m := range minute.PerDay {
		if x, ok := readings[m]; ok {
			r := minute.Reading{At: minute.Stamp(day*minute.PerDay+int64(m)) * minute.MicrosPerMinute}
			if p.Station.Time.LabelEnd {
				r.At += minute.MicrosPerMinute
			}
			for _, c := range p.layout.Channels {
				if v, ok := x[c]; ok {
					r.Values = append(r.Values, minute.ChannelValue{Channel: c, Value: minute.Single(v)})
				}
			}
			b.Append(&r)
		}
	}
	judger := NewJudger(p, nil)
	j := judger.Begin(day)
	judger.Advance(blockOf(p, &b, day))
	judger.End()
	Settle(p, j, nil)
	return j
}

// zenithRow is the row of the afternoon whose apparent zenith angle is next to the one given.
func zenithRow(j *Judged, deg float64) int {
	best := 750
	for r := 750; r < minute.PerDay; r++ {
		if math.Abs(j.ApparentZenithDeg[r]-deg) < math.Abs(j.ApparentZenithDeg[best]-deg) {
			best = r
		}
	}
	return best
}

// TestWhoMayReject goes through the rules of who may reject: the raw signal, what is possible, and faults to act on. All else questions at
// most; a night value down to the class's zero offset (10 W/m2 of class A, ISO 9060:2018, from memory) and 5 W/m2 is accepted.
func TestWhoMayReject(t *testing.T) {
	p := planOf(t, plainText)
	sun := p.NewJudged(dayOf(t, equinox))
	const noon, midnight = 727, 60
	at := func(deg float64) int { return zenithRow(sun, deg) }
	mu := func(r int) float64 { return sun.CosZenith[r] }
	type channels = map[string]float64
	closing := func(r int, b, d, factor float64) channels {
		return channels{"ghi": factor * (b*mu(r) + d), "dni": b, "dhi": d}
	}
	for _, c := range []struct {
		name     string
		row      int
		in       channels
		quantity rules.Quantity
		want     rules.Verdict
		misses   []rules.Test // exactly these
	}{
		{"night, -1.5", midnight, channels{"ghi": -1.5}, rules.Global, rules.Accepted, nil},
		{"night, -12 of class A", midnight, channels{"ghi": -12}, rules.Global, rules.Accepted, []rules.Test{rules.NightZero}},
		{"night, -15 of class A", midnight, channels{"ghi": -15}, rules.Global, rules.Accepted, []rules.Test{rules.NightZero}},
		{"night, -20 of class A", midnight, channels{"ghi": -20}, rules.Global, rules.Rejected, []rules.Test{rules.Possible, rules.Rare, rules.NightZero}},
		{"night, 12", midnight, channels{"ghi": 12}, rules.Global, rules.Accepted, []rules.Test{rules.NightZero}},
		{"night, 16", midnight, channels{"ghi": 16}, rules.Global, rules.Questioned, []rules.Test{rules.NightZero}},
		{"night, 90: within the limits, and light all the same", midnight, channels{"ghi": 90}, rules.Global, rules.Questioned, []rules.Test{rules.NightZero, rules.Rare}},
		{"night, 101", midnight, channels{"ghi": 101}, rules.Global, rules.Rejected, []rules.Test{rules.Possible, rules.NightZero, rules.Rare}},
		{"noon, 1.2 times clear", noon, channels{"ghi": 1290}, rules.Global, rules.Accepted, nil},
		{"noon, beyond rare", noon, channels{"ghi": 1750}, rules.Global, rules.Questioned, []rules.Test{rules.Rare}},
		{"noon, beyond possible", noon, channels{"ghi": 2300}, rules.Global, rules.Rejected, []rules.Test{rules.Rare, rules.Possible}},
		{"direct above the extraterrestrial", noon, channels{"dni": 1400}, rules.Direct, rules.Rejected, []rules.Test{rules.Rare, rules.Possible}},
		{"closure sound", noon, closing(noon, 800, 100, 1.05), rules.Global, rules.Accepted, nil},
		{"closure off: global", noon, closing(noon, 800, 100, 1.2), rules.Global, rules.Questioned, []rules.Test{rules.Closure}},
		{"closure off: direct", noon, closing(noon, 800, 100, 1.2), rules.Direct, rules.Questioned, []rules.Test{rules.Closure}},
		{"closure off: diffuse", noon, closing(noon, 800, 100, 1.2), rules.Diffuse, rules.Questioned, []rules.Test{rules.Closure}},
		{"closure off at 84 degrees", at(84), closing(at(84), 500, 60, 1.3), rules.Diffuse, rules.Questioned, []rules.Test{rules.Closure}},
		{"closure off at 86 degrees is only said", at(86), closing(at(86), 500, 60, 1.3), rules.Diffuse, rules.Accepted, []rules.Test{rules.Closure}},
		{"a parent that is not possible is no parent", noon, channels{"ghi": 2500, "dni": 800, "dhi": 100}, rules.Diffuse, rules.Accepted, nil},
		{"diffuse above global", noon, channels{"ghi": 300, "dhi": 400}, rules.Diffuse, rules.Questioned, []rules.Test{rules.DiffuseRatio}},
		{"reflected above what came down", noon, channels{"ghi": 300, "rsw": 320}, rules.Reflected, rules.Questioned, []rules.Test{rules.Albedo}},
		{"longwave above the air's in an inversion", midnight, channels{"lwd": 350, "ta_c": 0}, rules.LWDown, rules.Questioned, []rules.Test{rules.LWAir}},
		{"desert ground", noon, channels{"lwu": 690, "ta_c": 30}, rules.LWUp, rules.Questioned, []rules.Test{rules.LWAir}},
		{"longwave pair", noon, channels{"lwd": 450, "lwu": 400}, rules.LWDown, rules.Questioned, []rules.Test{rules.LWPair}},
		{"longwave that cannot be", noon, channels{"lwd": 20}, rules.LWDown, rules.Rejected, []rules.Test{rules.Possible, rules.Rare}},
		{"nothing sent", noon, channels{"dni": 1}, rules.Global, rules.Absent, []rules.Test{rules.Missing}},
		{"a mark", noon, channels{"ghi": -7999}, rules.Global, rules.Absent, []rules.Test{rules.Missing, rules.Signal}},
		{"air temperature", noon, channels{"ta_c": 21}, rules.AirTemperature, rules.Accepted, nil},
		{"air that cannot be", noon, channels{"ta_c": 80}, rules.AirTemperature, rules.Rejected, []rules.Test{rules.Possible}},
		{"humidity in fog", noon, channels{"rh_pct": 104}, rules.Humidity, rules.Accepted, nil},
		{"pressure in pascals", noon, channels{"p_hpa": 101300}, rules.Pressure, rules.Rejected, []rules.Test{rules.Possible}},
		{"wind that cannot be", noon, channels{"ws_ms": 130}, rules.WindSpeed, rules.Rejected, []rules.Test{rules.Possible}},
		{"ultraviolet", noon, channels{"uv": 60}, rules.UV, rules.Accepted, nil},
		{"ultraviolet that cannot be", noon, channels{"uv": 400}, rules.UV, rules.Rejected, []rules.Test{rules.Possible}},
		{"par", noon, channels{"par": 2200}, rules.PAR, rules.Accepted, nil},
	} {
		t.Run(c.name, func(t *testing.T) {
			j := judgedMinutes(t, p, equinox, map[int]channels{c.row: c.in})
			s := j.Primary(c.quantity)
			if s.Verdict[c.row] != c.want {
				t.Errorf("verdict %v, want %v (missed %s)", s.Verdict[c.row], c.want, s.Missed[c.row].Join(" "))
			}
			var misses rules.TestSet
			for _, m := range c.misses {
				misses |= m.Of()
			}
			if s.Missed[c.row] != misses {
				t.Errorf("missed %q, want %q", s.Missed[c.row].Join(" "), misses.Join(" "))
			}
			if (c.want == rules.Absent) != math.IsNaN(s.Value[c.row]) {
				t.Errorf("value %v with verdict %v", s.Value[c.row], c.want)
			}
			soundRows(t, p, j)
		})
	}
}

// soundRows holds what has to be so in every row: sets that agree with the outcomes, and verdicts that agree with values.
func soundRows(t interface {
	Helper()
	Fatalf(string, ...any)
}, p *Plan, j *Judged) {
	t.Helper()
	if j.Rows != minute.PerDay {
		t.Fatalf("%d rows after the day's end", j.Rows)
	}
	for i := range j.Series {
		s := &j.Series[i]
		for r := range j.Rows {
			var missed, passed rules.TestSet
			for k, column := range s.Outcomes {
				test := rules.Test(k)
				if (column != nil) != p.series[i].tests.Has(test) {
					t.Fatalf("%s: column of %v", s.Instrument, test)
				}
				if column == nil {
					continue
				}
				switch column[r] {
				case rules.Miss:
					missed |= test.Of()
				case rules.Pass:
					passed |= test.Of()
				case rules.NotRun:
					if s.Primary {
						t.Fatalf("%s row %d: %v says nothing", s.Instrument, r, test)
					}
				}
			}
			if missed != s.Missed[r] || passed != s.Passed[r] {
				t.Fatalf("%s row %d: missed %q passed %q, the outcomes say %q %q", s.Instrument, r, s.Missed[r].Join(" "), s.Passed[r].Join(" "), missed.Join(" "), passed.Join(" "))
			}
			if (s.Verdict[r] == rules.Absent) != (s.Measured[r] != s.Measured[r]) || (s.N[r] == 0) != (s.Verdict[r] == rules.Absent) {
				t.Fatalf("%s row %d: verdict %v, measured %v, n %d", s.Instrument, r, s.Verdict[r], s.Measured[r], s.N[r])
			}
		}
	}
}

// TestSunBehindTheMask: closure does not apply while the sun stands behind the horizon mask.
func TestSunBehindTheMask(t *testing.T) {
	p := planOf(t, plainText+"    horizon: [[0, 30], [180, 30]]\n")
	sun := p.NewJudged(dayOf(t, equinox))
	r := zenithRow(sun, 65) // 25 degrees high, the mask is 30 everywhere
	j := judgedMinutes(t, p, equinox, map[int]map[string]float64{r: {"ghi": 700, "dni": 0, "dhi": 100}})
	if o := j.Primary(rules.Global).Outcomes[rules.Closure][r]; o != rules.SunHidden {
		t.Errorf("closure with the sun behind the mask: %v, want %v", o, rules.SunHidden)
	}
	r = zenithRow(sun, 55)
	j = judgedMinutes(t, p, equinox, map[int]map[string]float64{r: {"ghi": 700, "dni": 0, "dhi": 100}})
	if o := j.Primary(rules.Global).Outcomes[rules.Closure][r]; o != rules.Miss {
		t.Errorf("closure with the sun above it: %v, want %v", o, rules.Miss)
	}
}

// TestConflictAndClock: two values under a stamp question; a stamp ahead of its receipt is only said.
func TestConflictAndClock(t *testing.T) {
	p := planOf(t, plainText)
	day := dayOf(t, equinox)
	var b minute.Batch
	stamp := minute.Stamp(day*minute.PerDay+727) * minute.MicrosPerMinute
	for _, v := range []float64{800, 810} {
		b.Append(&minute.Reading{At: stamp, Values: []minute.ChannelValue{{Channel: "ghi", Value: minute.Single(v)}}})
	}
	b.Append(&minute.Reading{At: stamp + minute.MicrosPerMinute, Ahead: true, Values: []minute.ChannelValue{{Channel: "ghi", Value: minute.Single(805)}}})
	judger := NewJudger(p, nil)
	j := judger.Begin(day)
	judger.Advance(blockOf(p, &b, day))
	judger.End()
	Settle(p, j, nil)
	g := j.Primary(rules.Global)
	if g.Verdict[727] != rules.Questioned || g.Missed[727] != rules.Conflict.Of() || g.Value[727] != 800 {
		t.Errorf("conflict: %v, %q, value %v", g.Verdict[727], g.Missed[727].Join(" "), g.Value[727])
	}
	if g.Verdict[728] != rules.Accepted || g.Missed[728] != rules.Clock.Of() {
		t.Errorf("clock: %v, %q", g.Verdict[728], g.Missed[728].Join(" "))
	}
}

// TestEpisodesAndVerdicts: an episode to act on rejects what it reaches, one to watch is only said, and a value that is restored is
// questioned at most unless another fault rejects it, in whatever order the episodes are given.
func TestEpisodesAndVerdicts(t *testing.T) {
	p := planOf(t, plainText)
	day := dayOf(t, equinox)
	in := map[int]map[string]float64{}
	for m := 700; m < 760; m++ {
		in[m] = map[string]float64{"ghi": 850 + float64(m%3), "dni": 800 + float64(m%5), "dhi": 60}
	}
	j := judgedMinutes(t, p, equinox, in)
	first := day * minute.PerDay
	episode := func(kind rules.FaultKind, severity rules.Severity, from, to int64, e ...fault.Evidence) fault.Episode {
		return fault.Episode{Instrument: "G1", Kind: kind, Severity: severity, From: first + from, To: first + to, Evidence: e}
	}
	frozen := episode(rules.SignalFrozen, rules.Act, 710, 730)
	watched := episode(rules.Noise, rules.Watch, 700, 705)
	offset := episode(rules.ZeroOffset, rules.Act, 720, 740, fault.Evidence{Name: "offset", Value: -30, Unit: "W/m2"})
	g := j.Primary(rules.Global)
	for _, order := range [][]fault.Episode{{frozen, watched, offset}, {offset, frozen, watched}} {
		Settle(p, j, order)
		want := canonicalDigest(j)
		for r, verdict := range map[int]rules.Verdict{702: rules.Accepted, 709: rules.Accepted, 710: rules.Rejected, 725: rules.Rejected, 730: rules.Questioned, 739: rules.Questioned, 740: rules.Accepted} {
			if g.Verdict[r] != verdict {
				t.Errorf("row %d: %v, want %v", r, g.Verdict[r], verdict)
			}
		}
		if g.Value[735] != g.Measured[735]+30 || !g.Restored[735] || g.Value[709] != g.Measured[709] {
			t.Errorf("value %v from %v", g.Value[735], g.Measured[735])
		}
		if !g.Faults[702].Has(rules.Noise) || !g.Faults[725].Has(rules.SignalFrozen) || !g.Faults[725].Has(rules.ZeroOffset) || g.Faults[745] != 0 {
			t.Error("the rows do not name the episodes that reach them")
		}
		Settle(p, j, order)
		if canonicalDigest(j) != want {
			t.Error("settling twice gives other rows than settling once")
		}
	}
	Settle(p, j, nil)
	if g.Verdict[725] != rules.Accepted || g.Faults[725] != 0 || g.Restored[735] || g.Value[735] != g.Measured[735] {
		t.Error("episodes that are taken back leave traces")
	}
	// What the tests reject of the measured value is lifted by restoring it.
	in = map[int]map[string]float64{60: {"ghi": -30}}
	j = judgedMinutes(t, p, equinox, in)
	Settle(p, j, []fault.Episode{episode(rules.ZeroOffset, rules.Act, 0, 1440, fault.Evidence{Name: "offset", Value: -30, Unit: "W/m2"})})
	if g = j.Primary(rules.Global); g.Verdict[60] != rules.Questioned || g.Value[60] != 0 {
		t.Errorf("restored from -30: %v, value %v", g.Verdict[60], g.Value[60])
	}
	if g.Verdict[61] != rules.Absent {
		t.Errorf("a minute without a value is %v under an episode", g.Verdict[61])
	}
}
