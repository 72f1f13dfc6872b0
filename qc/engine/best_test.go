package engine

import (
	"math"
	"testing"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

const pairText = networkText + `
  - id: pair
    latitude: 46.8
    longitude: 9.1
    elevation: 480
    instruments:
      - {id: G1, measures: global, class: A, primary: true, input: {irradiance: g1}}
      - {id: G2, measures: global, class: A, input: {irradiance: g2}}
      - {id: B1, measures: direct, class: A, input: {irradiance: b1}}
      - {id: D1, measures: diffuse, class: A, input: {irradiance: d1}}
`

const twoText = networkText + `
  - id: two
    latitude: 46.8
    longitude: 9.1
    elevation: 480
    instruments:
      - {id: G1, measures: global, class: A, input: {irradiance: g1}}
      - {id: D1, measures: diffuse, class: A, input: {irradiance: d1}}
`

// settled judges rows of 2026-06-21, 11:00 UTC on, and gives the day.
func settled(t *testing.T, text string, rows ...map[string]float64) *Judged {
	t.Helper()
	p := planOf(t, text)
	day := dayOf(t, "2026-06-21")
	b := &minute.Batch{}
	for i, row := range rows {
		r := minute.Reading{At: minute.Stamp(day*minute.PerDay+noon+int64(i)) * minute.MicrosPerMinute}
		for _, c := range p.layout.Channels { // in the layout's order
			if v, ok := row[c]; ok {
				r.Values = append(r.Values, minute.ChannelValue{Channel: c, Value: minute.Single(v)})
			}
		}
		b.Append(&r)
	}
	judger := NewJudger(p, nil)
	j := judger.Begin(day)
	judger.Advance(blockOf(p, b, day))
	Settle(p, j, []fault.Episode{})
	return j
}

const noon = 11 * 60

func TestBestOfGlobal(t *testing.T) {
	row := func(g1, g2, b1, d1 float64) map[string]float64 {
		return map[string]float64{"g1": g1, "g2": g2, "b1": b1, "d1": d1}
	}
	j := settled(t, pairText,
		row(910, 912, 850, 130), // all sound
		row(910, 912, -7999, 130),
		row(-7999, 912, -7999, 130),
		row(5000, 912, -7999, 130),    // the primary is rejected
		row(910, 300, -7999, 130),     // the two disagree: both are questioned, the primary stands
		row(-7999, -7999, -7999, 130), // nothing
		row(-7999, -7999, 850, 130),   // the sum alone
	)
	best := j.BestOf(rules.Global)
	sum := RoundIrradiance(850*j.CosZenith[noon] + 130)
	for i, want := range []struct {
		value   float64
		source  rules.Source
		verdict rules.Verdict
	}{
		{sum, rules.DirectDiffuse, rules.Accepted},
		{910, rules.FromPrimary, rules.Accepted},
		{912, rules.FromSecondary, rules.Accepted},
		{912, rules.FromSecondary, rules.Accepted},
		{910, rules.FromPrimary, rules.Questioned},
		{math.NaN(), rules.NoSource, rules.Absent},
		{RoundIrradiance(850*j.CosZenith[noon+6] + 130), rules.DirectDiffuse, rules.Accepted},
	} {
		r := noon + i
		if got := best.Value[r]; got != want.value && !(got != got && want.value != want.value) || best.Source[r] != want.source || best.Verdict[r] != want.verdict {
			t.Errorf("row %d: %v %v %v, want %+v; missed %s", i, got, best.Source[r], best.Verdict[r], want, j.Primary(rules.Global).Missed[r].Join(";"))
		}
		if u := best.U95[r]; (u == u) != (want.value == want.value) || u <= 0 {
			t.Errorf("row %d: U95 %v", i, u)
		}
	}
	// The column of the quantity stays the primary instrument's own.
	if g := j.Primary(rules.Global); g.Value[noon] != 910 || g.Instrument != "G1" {
		t.Errorf("global is %v of %s", g.Value[noon], g.Instrument)
	}
	for i, want := range []rules.Outcome{rules.Pass, rules.Pass, rules.NoValue, rules.NoPartner, rules.Miss} {
		if got := j.Primary(rules.Global).Outcomes[rules.Partner][noon+i]; i != 3 && got != want {
			t.Errorf("row %d: partner %v, want %v", i, got, want)
		}
	}
	if got := j.Secondary(rules.Global).Outcomes[rules.Partner][noon+3]; got != rules.NoPartner {
		t.Errorf("beside a value that failed on its own: partner %v", got)
	}
}

// Without a pyrheliometer direct is worked out and marked, and judges neither of its parents: their tests and verdicts are those of
// a station that asks for nothing of the kind.
func TestDerivedDirect(t *testing.T) {
	j := settled(t, twoText, map[string]float64{"g1": 910, "d1": 130}, map[string]float64{"g1": 910, "d1": 2000})
	best := j.BestOf(rules.Direct)
	if want := RoundIrradiance((910 - 130) / j.CosZenith[noon]); best.Value[noon] != want || best.Source[noon] != rules.GlobalDiffuse || best.Verdict[noon] != rules.Accepted {
		t.Errorf("derived %v %v %v, want %v", best.Value[noon], best.Source[noon], best.Verdict[noon], want)
	}
	if best.Source[noon+1] != rules.NoSource {
		t.Errorf("derived from a rejected parent: %v", best.Value[noon+1])
	}
	if best.Source[0] != rules.NoSource {
		t.Error("derived at night")
	}
	if j.Primary(rules.Direct) != nil || j.Primary(rules.Global).Outcomes[rules.Closure][noon] != rules.NoPartner {
		t.Error("the derived direct judges its parents")
	}
	if g := j.BestOf(rules.Global); g.Value[noon] != 910 || g.Source[noon] != rules.FromPrimary {
		t.Errorf("best global %v %v", g.Value[noon], g.Source[noon])
	}
}
