package product

import (
	"math"
	"testing"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store/table"
)

const day0 = int64(20_605) // 2026-06-01

// A station is an invented one on the equator at equinox: the sun rises at 6:00 and stands in the zenith at noon. Its functions give what a
// minute of the day holds.
type station struct {
	value   map[rules.Quantity]func(day, m int) float64
	verdict func(q rules.Quantity, day, m int) rules.Verdict
	u95, sd float64
	n       uint32
}

func zenithOf(m int) float64 { return math.Abs(float64(m)+0.5-720) / 4 }

// plain has constant sky: global 1000 cos, direct 800, diffuse the rest, albedo 0.2, longwave 300 and 400.
func plain() *station {
	mu := func(m int) float64 { return max(0, math.Cos(zenithOf(m)*math.Pi/180)) }
	up := func(m int) float64 {
		if zenithOf(m) < 90 {
			return 1
		}
		return 0
	}
	return &station{u95: 10, sd: math.NaN(), n: 60, verdict: func(rules.Quantity, int, int) rules.Verdict { return rules.Accepted },
		value: map[rules.Quantity]func(day, m int) float64{
			rules.Global:         func(_, m int) float64 { return 1000 * mu(m) },
			rules.Direct:         func(_, m int) float64 { return 800 * up(m) },
			rules.Diffuse:        func(_, m int) float64 { return 200 * mu(m) },
			rules.Reflected:      func(_, m int) float64 { return 200 * mu(m) },
			rules.LWDown:         func(int, int) float64 { return 300 },
			rules.LWUp:           func(int, int) float64 { return 400 },
			rules.AirTemperature: func(_, m int) float64 { return 15 + 5*math.Cos(float64(m-840)*math.Pi/720) },
		}}
}

func (s *station) judged(day int) *engine.Judged {
	const n = minute.PerDay
	column := func(f func(m int) float64) []float64 {
		out := make([]float64, n)
		for m := range out {
			out[m] = f(m)
		}
		return out
	}
	nan := func(int) float64 { return math.NaN() }
	clear := func(m int) float64 { return 1000 * max(0, math.Cos(zenithOf(m)*math.Pi/180)) }
	j := &engine.Judged{Station: "equator", Day: day0 + int64(day), Rows: n, Records: make([]uint16, n), ZenithDeg: column(zenithOf), ApparentZenithDeg: column(zenithOf),
		AzimuthDeg: column(nan), ExtraterrestrialWm2: column(func(int) float64 { return 1361 }), ClearGlobalWm2: column(clear), ClearDirectWm2: column(nan),
		ClearDiffuseWm2: column(nan), ClearLWDownWm2: column(func(int) float64 { return 280 })}
	for q := rules.Quantity(0); int(q) < rules.QuantityCount; q++ {
		f := s.value[q]
		if f == nil {
			continue
		}
		x := engine.Series{Quantity: q, Primary: true, Value: column(func(m int) float64 { return f(day, m) }), SD: column(func(int) float64 { return s.sd }), Min: column(nan), Max: column(nan),
			U95: column(func(int) float64 { return s.u95 }), N: make([]uint32, n), Verdict: make([]rules.Verdict, n), Missed: make([]rules.TestSet, n),
			Passed: make([]rules.TestSet, n), Faults: make([]rules.FaultSet, n)}
		x.Measured = x.Value
		for m := range n {
			x.N[m], x.Verdict[m] = s.n, s.verdict(q, day, m)
			if x.Verdict[m] == rules.Absent {
				x.Value[m] = math.NaN()
			}
		}
		j.Series = append(j.Series, x)
	}
	return j
}

// minutes is the table of minutes of days first..last.
func (s *station) minutes(first, last int) *table.Table {
	t := table.NewMinutes((last - first + 1) * minute.PerDay)
	for d := first; d <= last; d++ {
		table.Append(t, s.judged(d), (d-first)*minute.PerDay)
	}
	return t
}

func (s *station) day(t *testing.T, settings Settings) Products {
	t.Helper()
	return Make(s.minutes(0, 0), settings, false)
}

// cell is one value of a table, NaN for null.
func cell(t *testing.T, x *table.Table, name string, row int) float64 {
	t.Helper()
	v := x.Find(name)
	switch {
	case v == nil:
		t.Fatalf("no column %s", name)
	case v.Doubles != nil:
		return v.Doubles[row]
	case v.Ints != nil && v.Ints[row] != table.NullInt:
		return float64(v.Ints[row])
	}
	return math.NaN()
}

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) && !(math.IsNaN(got) && math.IsNaN(want)) {
		t.Errorf("%s: %v, want %v within %v", what, got, want, tolerance)
	}
}
