package engine

import (
	"math"
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// The partial eclipse of 2015-03-20 at 55.79 N, 12.53 E: about four fifths of the disc were covered towards 09:50 UTC (NASA's published
// circumstances of that eclipse, from memory). The expected sky follows; the limits do not.
func TestEclipseScalesTheExpectedSky(t *testing.T) {
	st := &rules.Station{ID: "eclipse", LatitudeDeg: 55.79064, LongitudeDeg: 12.52505, ElevationM: 50, Limits: rules.DefaultLimits(),
		Instruments: []rules.Instrument{{ID: "G1", Measures: rules.Global, Primary: true, Input: rules.Input{Irradiance: "ghi", SignalMin: math.NaN(), SignalMax: math.NaN()}}}}
	p, err := NewPlan(st)
	if err != nil {
		t.Fatal(err)
	}
	const day = 16514 // 2015-03-20
	clear := func(day int64) *Judged {
		j := NewJudger(p, nil)
		out := j.Begin(day)
		b := minute.NewBlock(day, len(p.Layout().Channels))
		for r := range minute.PerDay {
			b.Records[r] = 1
		}
		b.Rows = minute.PerDay
		j.Advance(b)
		return out
	}
	on, before := clear(day), clear(day-1)
	const greatest = 9*60 + 50
	if share := on.ClearGlobalWm2[greatest] / before.ClearGlobalWm2[greatest]; math.Abs(share-0.2) > 0.03 {
		t.Errorf("clear-sky global at the greatest eclipse is %.3f of the day before's, want 0.20 within 0.03", share)
	}
	if share := on.ClearGlobalWm2[14*60] / before.ClearGlobalWm2[14*60]; math.Abs(share-1) > 0.02 {
		t.Errorf("after the eclipse it is %.3f, want 1", share)
	}
	if on.ExtraterrestrialWm2[greatest] < 1300 {
		t.Errorf("extraterrestrial %.0f W/m2: the limits must keep the whole disc", on.ExtraterrestrialWm2[greatest])
	}
}
