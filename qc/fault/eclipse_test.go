package fault_test

import (
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/qc/sun"
	"fluxwarden/qc/synth"
)

// TestEclipseIsNobodysFault: a day on which the moon takes the sun away from a clear station raises nothing, whether it takes all or a part. The
// eclipse of 2027-08-02 is total in upper Egypt at about 10 UTC and partial over Europe (published by NASA's eclipse bulletins; qc/sun's
// tests hold the times).
func TestEclipseIsNobodysFault(t *testing.T) {
	for _, c := range []struct {
		name                string
		latitude, longitude float64
		least               float64 // of the disc that is hidden at most
	}{{"total", 25.7, 32.6, 0.999}, {"large", 31.5, 18.0, 0.8}, {"partial", 44.0, 9.0, 0.3}} {
		t.Run(c.name, func(t *testing.T) {
			t.Parallel()
			clear := 0
			for seed := range uint64(2) {
				s := stand{name: "shade-" + c.name, climate: synth.Desert, latitude: c.latitude, longitude: c.longitude, elevation: 120, first: "2027-07-17", volts: seed%2 == 0}
				const days = 18
				b := newBed(t, &s, 20+seed, days)
				day := dayOf(t, "2027-08-02")
				if hidden, open := mostHidden(b, day); hidden < c.least {
					t.Fatalf("the moon hides %.3f at most", hidden)
				} else if open {
					clear++
				}
				got := b.judge(nil, 0, days, false, b.soundReading)
				for _, e := range acts(got.episodes) {
					t.Errorf("seed %d: %s", seed, tell(&e))
				}
			}
			if clear == 0 {
				t.Error("no seed had a clear sky: the test shows nothing")
			}
		})
	}
}

// mostHidden is how much of the disc is hidden at most on a day with the sun up, and whether the sky was clear an hour before and after.
func mostHidden(b *bed, day int64) (most float64, open bool) {
	site := sun.Site{LatitudeDeg: b.latitude, LongitudeDeg: b.longitude, ElevationM: b.elevation}
	d := sun.NewDay(day, site)
	e := sun.NewEclipse(&d, site)
	at := 0
	for m := range minute.PerDay {
		if o := e.ObscuredFraction(float64(60*m + 30)); o > most && d.AtMinute(float64(60*m+30)).CosZenith > 0.2 {
			most, at = o, m
		}
	}
	beam := func(m int) float64 {
		return b.synth().True(b.stamp(int(day-b.first)*minute.PerDay + m))[1]
	}
	return most, beam(at-100) > 500 && beam(at+100) > 500
}
