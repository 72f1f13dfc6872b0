package engine

import (
	"testing"
	"time"

	"fluxwarden/rules"
)

const localText = networkText + `
  - id: own
    latitude: 46.8
    longitude: 9.1
    elevation: 480
    instruments:
      - {id: G1, measures: global, class: A, input: {irradiance: g1}}
      - {id: D1, measures: diffuse, class: A, input: {irradiance: d1}}
    housekeeping: {door: door}
    rules:
      tests:
        - {name: door_open, of: [global, diffuse], miss: house_door > 0.0}
        - {name: bright, of: [global], miss: "global > 1000.0 && zenith < 60.0 && day_of_year == 172.0"}
`

func TestLocalTests(t *testing.T) {
	j := settled(t, localText,
		map[string]float64{"g1": 910, "d1": 130, "door": 0},
		map[string]float64{"g1": 910, "d1": 130, "door": 1},
		map[string]float64{"g1": 1050, "d1": 130, "door": 1},
		map[string]float64{"g1": 910, "d1": 130},
		map[string]float64{"d1": 130, "door": 0},
	)
	for i, want := range []struct {
		global, diffuse rules.Outcome
		verdict         rules.Verdict
		out             string
	}{
		{rules.Pass, rules.Pass, rules.Accepted, ""},
		{rules.Miss, rules.Miss, rules.Questioned, "door_open"},
		{rules.Miss, rules.Miss, rules.Questioned, "door_open;bright"},
		{rules.Pass, rules.NoValue, rules.Accepted, ""}, // one of two applies
		{rules.NoValue, rules.Pass, rules.Absent, ""},
	} {
		r := noon + i
		g, d := j.Primary(rules.Global), j.Primary(rules.Diffuse)
		if g.Outcomes[rules.Local][r] != want.global || d.Outcomes[rules.Local][r] != want.diffuse || g.Verdict[r] != want.verdict || j.LocalText(j.LocalOut[r]) != want.out {
			t.Errorf("row %d: %v %v %v %q, want %+v", i, g.Outcomes[rules.Local][r], d.Outcomes[rules.Local][r], g.Verdict[r], j.LocalText(j.LocalOut[r]), want)
		}
		if g.Passed[r].Has(rules.Local) != (want.global == rules.Pass) || g.Missed[r].Has(rules.Local) != (want.global == rules.Miss) {
			t.Errorf("row %d: sets %v %v", i, g.Passed[r].Has(rules.Local), g.Missed[r].Has(rules.Local))
		}
	}
}

func TestDayOfYear(t *testing.T) {
	for day := int64(-80000); day < 120000; day += 13 {
		if got, want := dayOfYear(day), time.Unix(86400*day, 0).UTC().YearDay(); got != want {
			t.Fatalf("day %d: %d, want %d", day, got, want)
		}
	}
}
