package export

import (
	"bytes"
	"math"
	"strings"
	"testing"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// judged is a day of a station with one pyranometer and a thermometer, of which three minutes are known.
func judged(day int64) *engine.Judged {
	column := func(v ...float64) []float64 { return append(v, math.NaN())[:3] }
	none := column(math.NaN(), math.NaN(), math.NaN())
	j := &engine.Judged{Station: "saltpan", Day: day, Rows: 3, Records: []uint16{60, 59, 0}, ZenithDeg: column(45.5, 45.25, 45), ApparentZenithDeg: none, AzimuthDeg: none,
		ExtraterrestrialWm2: none, ClearGlobalWm2: none, ClearDirectWm2: none, ClearDiffuseWm2: none, ClearLWDownWm2: none}
	series := func(q rules.Quantity, values ...float64) engine.Series {
		return engine.Series{Quantity: q, Primary: true, Measured: column(values...), Value: column(values...), SD: column(0.5, 0.25), Min: none, Max: none, U95: none,
			N: []uint32{60, 59, 0}, Verdict: []rules.Verdict{rules.Accepted, rules.Questioned, rules.Absent},
			Missed: []rules.TestSet{0, rules.Spike.Of() | rules.Closure.Of(), rules.Missing.Of()}, Passed: []rules.TestSet{0, 0, 0},
			Faults: []rules.FaultSet{0, rules.DomeWet.Of(), 0}}
	}
	j.Series = []engine.Series{series(rules.Global, 812.34, -1.5), series(rules.AirTemperature, 17.9, 18)}
	return j
}

func TestCSV(t *testing.T) {
	a, err := store.OpenForWriting(vfs.NewMem(), "/archive", store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	const day = 20_625 // 2026-06-21
	if _, err := a.Commit(&store.Commit{Days: []store.Day{{Judged: judged(day)}}}); err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	rows, err := CSV(&b, a, Request{Station: "saltpan", From: day * minute.PerDay, To: (day + 1) * minute.PerDay})
	if err != nil || rows != 3 {
		t.Fatalf("%d rows, %v", rows, err)
	}
	want := `time,global,global_verdict,global_reasons,global_measured,global_u95,air_temperature,air_temperature_verdict,air_temperature_reasons,air_temperature_measured,global_sd,global_min,global_max,global_n,records,zenith_deg,apparent_zenith_deg,azimuth_deg,extraterrestrial,clear_global,clear_direct,clear_diffuse,clear_lw_down
2026-06-21T00:00:00Z,812.34,accepted,,812.34,,17.91,accepted,,17.91,0.50,,,60,60,45.500,,,,,,,
2026-06-21T00:01:00Z,-1.50,questioned,spike;closure;dome_wet,-1.50,,18.00,questioned,spike;closure;dome_wet,18.00,0.25,,,59,59,45.250,,,,,,,
2026-06-21T00:02:00Z,,absent,missing,,,,absent,missing,,,,,0,0,45.000,,,,,,,
`
	if b.String() != want {
		t.Errorf("got\n%s\nwant\n%s", b.String(), want)
	}
	b.Reset()
	if rows, err = CSV(&b, a, Request{Station: "saltpan", From: day*minute.PerDay + 1, To: day*minute.PerDay + 2, Quantities: []string{"global"}}); err != nil || rows != 1 ||
		strings.Count(b.String(), "\n") != 2 || strings.Contains(b.String(), "air_temperature") {
		t.Errorf("one minute of global: %d rows, %v\n%s", rows, err, b.String())
	}
	if _, err := CSV(&b, a, Request{Station: "nowhere", To: 1}); err == nil || !strings.Contains(err.Error(), `"nowhere"`) {
		t.Errorf("an unknown station: %v", err)
	}
}

func BenchmarkCSV(b *testing.B) {
	a, err := store.OpenForWriting(vfs.NewMem(), "/archive", store.Options{})
	if err != nil {
		b.Fatal(err)
	}
	c := &store.Commit{}
	for d := int64(20_610); d < 20_640; d++ {
		c.Days = append(c.Days, store.Day{Judged: judged(d)})
	}
	if _, err := a.Commit(c); err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		if _, err := CSV(&bytes.Buffer{}, a, Request{Station: "saltpan", To: 1 << 40}); err != nil {
			b.Fatal(err)
		}
	}
}
