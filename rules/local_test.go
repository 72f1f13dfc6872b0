package rules

import (
	"math"
	"strings"
	"testing"
)

const localSite = `network: {id: net}
stations:
  - id: base
    latitude: 57.1
    longitude: -3.6
    elevation: 640
    instruments:
      - {id: G1, measures: global, input: {irradiance: g}}
    housekeeping: {door: door_open}
    rules:
      tests:
        - {name: calm, of: [global], miss: EXPRESSION}
`

func TestLocalOutcomes(t *testing.T) {
	for _, c := range []struct {
		miss string
		want Outcome
	}{
		{"global > 20.0", Miss},
		{"global > 20", Miss}, // a comparison may be with a whole number
		{"global < 20", Pass},
		{"direct > 20", NoValue},
		{"global > 20 || direct > 20", NoValue}, // what it names has to be there
		{"house_door == 1.0 && zenith < 60", Miss},
		{"global_sd / global > 0.5", Pass},
		{"math.abs(clear_global - global) > 50.0", Miss},
		{"(global - global) / (global - global) > 0", Pass}, // nothing over nothing is greater than nothing
		{"[1, 2][int(global)] > 0", RuleBroken},
		{"[global, 3.0].exists(x, x < 4.0)", Miss},
		{"day_of_year == 172.0 && minute_of_day >= 660.0", Miss},
	} {
		site, err := Parse("x.yaml", []byte(strings.Replace(localSite, "EXPRESSION", "'"+c.miss+"'", 1)))
		if err != nil {
			t.Errorf("%s: %v", c.miss, err)
			continue
		}
		st := &site.Stations[0]
		values := make([]float64, len(st.LocalNames()))
		for i := range values {
			values[i] = math.NaN()
		}
		values[LocalZenith], values[LocalClearGlobal], values[LocalDayOfYear], values[LocalMinuteOfDay] = 30, 900, 172, 661
		values[LocalQuantities], values[LocalQuantities+1] = 800, 3
		values[LocalHouse] = 1
		for range 2 { // asking changes nothing
			if got := st.Local[0].Check.Outcome(values); got != c.want {
				t.Errorf("%s: %v, want %v", c.miss, got, c.want)
			}
		}
	}
	if n := len(localNames); n != LocalHouse {
		t.Errorf("%d names for %d places", n, LocalHouse)
	}
}
