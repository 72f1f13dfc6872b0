package engine

import (
	"math"
	"testing"

	"fluxwarden/qc/fault"
	"fluxwarden/rules"
)

const houseText = networkText + `
  - id: house
    latitude: 46.8
    longitude: 9.1
    elevation: 480
    instruments:
      - {id: G1, measures: global, class: A, input: {irradiance: g1}, status: {channel: st, bits: [{bit: 0, test: signal}, {bit: 4, test: housekeeping}, {bit: 5, test: housekeeping, when: clear}]}}
      - {id: B1, measures: direct, class: A, input: {irradiance: b1}}
      - {id: D1, measures: diffuse, class: A, input: {irradiance: d1}}
    housekeeping:
      fan_g1: {channel: fan, of: [G1]}
      tracker: {channel: trk, values: [2, 3]}
      supply: {channel: batt, low: 11.5}
      precipitation: rain
      door: door
`

func TestHousekeepingAndStatus(t *testing.T) {
	row := func(more map[string]float64) map[string]float64 {
		r := map[string]float64{"g1": 910, "b1": 850, "d1": 130, "fan": 3000, "trk": 2, "batt": 12.6, "rain": 0, "st": 32, "door": 1}
		for k, v := range more {
			r[k] = v
		}
		return r
	}
	nan := math.NaN()
	cases := []struct {
		more                    map[string]float64
		global, direct, diffuse rules.Outcome
		verdict                 rules.Verdict // of global
		out                     string
	}{
		{nil, rules.Pass, rules.Pass, rules.Pass, rules.Accepted, ""},
		{map[string]float64{"fan": 120}, rules.Miss, rules.Pass, rules.Pass, rules.Questioned, "fan_g1"}, // under the table's 500 rpm
		{map[string]float64{"trk": 1}, rules.Pass, rules.Miss, rules.Miss, rules.Accepted, "tracker"},
		{map[string]float64{"batt": 11.2, "fan": 0}, rules.Miss, rules.Miss, rules.Miss, rules.Questioned, "fan_g1;supply"},
		{map[string]float64{"rain": 40}, rules.Pass, rules.Pass, rules.Pass, rules.Accepted, "precipitation"}, // more than ever fell in a minute
		{map[string]float64{"st": 32 + 16}, rules.Miss, rules.Pass, rules.Pass, rules.Questioned, ""},
		{map[string]float64{"st": 0}, rules.Miss, rules.Pass, rules.Pass, rules.Questioned, ""}, // bit 5 has to be set
		{map[string]float64{"st": 33}, rules.Pass, rules.Pass, rules.Pass, rules.Rejected, ""},
		{map[string]float64{"st": 0.5}, rules.Pass, rules.Pass, rules.Pass, rules.Accepted, ""},                                           // no word
		{map[string]float64{"fan": -7999, "batt": -9999, "trk": -9999}, rules.Pass, rules.NoPartner, rules.NoPartner, rules.Accepted, ""}, // nothing said
		{map[string]float64{"st": nan, "fan": nan, "batt": nan}, rules.NoPartner, rules.Pass, rules.Pass, rules.Accepted, ""},
	}
	var rows []map[string]float64
	for _, c := range cases {
		rows = append(rows, row(c.more))
	}
	j := settled(t, houseText, rows...)
	for i, c := range cases {
		r := noon + i
		for q, want := range map[rules.Quantity]rules.Outcome{rules.Global: c.global, rules.Direct: c.direct, rules.Diffuse: c.diffuse} {
			if got := j.Primary(q).Outcomes[rules.Housekeeping][r]; got != want {
				t.Errorf("case %d %s: %v, want %v", i, q, got, want)
			}
		}
		g := j.Primary(rules.Global)
		if g.Verdict[r] != c.verdict || j.HouseText(j.HouseOut[r]) != c.out {
			t.Errorf("case %d: %v out %q, want %v %q; missed %s", i, g.Verdict[r], j.HouseText(j.HouseOut[r]), c.verdict, c.out, g.Missed[r].Join(";"))
		}
		if passed := g.Passed[r].Has(rules.Housekeeping); passed != (c.global == rules.Pass) {
			t.Errorf("case %d: passed %v beside %v", i, passed, c.global)
		}
	}
	// What the diagnosis is told.
	var m fault.Minute
	j.house[noon+3].tell(&m)
	if m.Fan[rules.Global] != fault.HouseOut || m.Fan[rules.Diffuse] != fault.HouseUnknown || m.Tracker != fault.HouseSound || m.Supply != fault.HouseOut {
		t.Errorf("told %+v", m)
	}
	j.house[noon+4].tell(&m)
	if m.PrecipitationMM != 40 {
		t.Errorf("precipitation %v", m.PrecipitationMM)
	}
	u := planOf(t, houseText).setup
	if !u.HasPrecipitation || !u.HasTrackerMode || !u.HasSupply || !u.Instruments[rules.Global].HasFan || u.Instruments[rules.Diffuse].HasFan {
		t.Errorf("setup %+v", u)
	}
}
