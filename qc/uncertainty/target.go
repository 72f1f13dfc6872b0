package uncertainty

import (
	"math"

	"fluxwarden/rules"
)

// Target gives the uncertainty that the baseline network aims for, W/m2: a share of the value, and not less than a least; ok is false for
// a quantity that it states none for. Source: WMO/TD-No. 1274 (2005), Table 2.1, the column of 2004. Worked value: 5 and 12 W/m2
// for a global of 100 and 600 W/m2.
func Target(q rules.Quantity, valueWm2 float64) (targetWm2 float64, ok bool) {
	row := [...]struct{ percent, leastWm2 float64 }{rules.Global: {2, 5}, rules.Direct: {0.5, 1.5}, rules.Diffuse: {2, 3},
		rules.Reflected: {3, 0}, rules.LWDown: {2, 3}, rules.LWUp: {2, 3}}
	if int(q) >= len(row) {
		return math.NaN(), false
	}
	return math.Max(row[q].percent*percent*math.Abs(valueWm2), row[q].leastWm2), true
}
