package engine

import (
	"fmt"
	"math"
	"testing"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/rules"
)

// TestTheRightSensitivityClosesTheOvercast judges measured months twice: the global sensor's voltage with the sensitivity that the station used
// until 2015-05-13, and with the one that was right, 5.065 uV/(W/m2) (the station's own list of instruments). Under thick overcast global and
// diffuse are the same, and levelling, clock and tracker cannot matter: the median of their ratio has to come to one, from 1.7 % above it.
// The months' own irradiance was worked out with 4.98, so the voltage is that times 4.98.
func TestTheRightSensitivityClosesTheOvercast(t *testing.T) {
	const used, right = 4.98, 5.065
	at, columns := readTable(t, "lyngby_2015/2015_04.csv.gz", time.DateTime)
	uv := make([]float64, len(at))
	for i, v := range columns["GHI"] {
		uv[i] = v * used
	}
	columns["g_uv"] = uv
	batch := batchOf(at, columns)
	median := func(sensitivity float64) (ratio float64, minutes int) {
		p := planOf(t, fmt.Sprintf(networkText+`
  - id: lyngby
    latitude: 55.79064
    longitude: 12.52505
    elevation: 50
    instruments:
      - {id: G1, measures: global, class: A, input: {signal: g_uv, unit: uV}, calibrations: [{from: 2014-01-01, sensitivity: %v, unit: uV/(W/m2)}]}
      - {id: B1, measures: direct, class: A, input: {irradiance: DNI}}
      - {id: D1, measures: diffuse, class: A, input: {irradiance: DHI}}
`, sensitivity))
		first := dayOf(t, "2015-04-06") // on the first days of the month the night zero stands off
		var ratios []float64
		judgeDays(p, NewJudger(p, nil), batch, first, 24, func(j *Judged, _ DaySummary, _ []fault.Episode) {
			Settle(p, j, nil)
			g, b, d := j.Primary(rules.Global), j.Primary(rules.Direct), j.Primary(rules.Diffuse)
			for r := range j.Rows {
				if d.Value[r] > 80 && math.Abs(b.Value[r]) < 2 && g.Verdict[r] == rules.Accepted && d.Verdict[r] == rules.Accepted {
					ratios = append(ratios, g.Value[r]/d.Value[r])
				}
			}
		})
		return medianOf(ratios), len(ratios)
	}
	before, n := median(used)
	after, _ := median(right)
	t.Logf("%d overcast minutes: global over diffuse %.4f with %v uV/(W/m2), %.4f with %v", n, before, used, after, right)
	if n < 1000 || !(before > 1.012) || !(math.Abs(after-1) < 0.006) {
		t.Errorf("%d minutes, %.4f before and %.4f after; want more than 1000, above 1.012 and 1 within 0.006", n, before, after)
	}
}
