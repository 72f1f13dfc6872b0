package fault_test

import (
	"testing"

	"fluxwarden/rules"
)

// soundStands are stations with nothing wrong, whole and with parts left out, in light and dark seasons.
func soundStands() []stand {
	at := func(s stand, name, first, without string) stand {
		s.name, s.without = name, without
		if first != "" {
			s.first = first
		}
		return s
	}
	return []stand{
		moor, plain, island, fjord,
		at(moor, "moor-winter", "2026-11-10", ""),
		at(fjord, "polar-day", "2026-05-20", ""),
		at(fjord, "polar-night", "2026-11-25", ""),
		at(plain, "global-only", "", "PDRLU"),
		at(moor, "global-and-diffuse", "", "PRLU"),
		at(plain, "direct-only", "", "GDRLU"),
		at(moor, "longwave-only", "", "GPDR"),
		at(moor, "no-weather", "", "w"),
		at(moor, "weather-only-shortwave", "", "LUR"),
	}
}

// TestQuietWhenSound: sixty days of a sound station raise nothing; twenty of one that lacks parts or has an odd season.
func TestQuietWhenSound(t *testing.T) {
	for i, s := range soundStands() {
		t.Run(s.name, func(t *testing.T) {
			t.Parallel()
			days := 60
			if i >= 4 {
				days = 20
			}
			quiet(t, newBed(t, &s, 11, days))
		})
	}
}

func quiet(t *testing.T, b *bed) {
	t.Helper()
	got := b.judge(nil, 0, b.days, false, b.soundReading)
	for i := range got.episodes {
		e := &got.episodes[i]
		if err := wellFormed(e); err != nil {
			t.Error(err)
		}
		if e.Severity == rules.Act {
			t.Errorf("false alarm: %s", tell(e))
		}
	}
}

// TestQuietUnderBrightClouds: clouds beside the sun that lift global and diffuse by a quarter of the clear sky, for minutes at a time and up to 1.25
// times what a cloudless sky would give, are good data.
func TestQuietUnderBrightClouds(t *testing.T) {
	b := newBed(t, &plain, 4, 30)
	lifted := 0
	for m := range b.sound {
		spell := uint64(m/9) * 0x9e3779b97f4a7c15
		if spell>>61 != 0 { // an eighth of the time
			continue
		}
		swell := float64(m%9) * float64(8-m%9) / 16 // up and down again within nine minutes
		values := b.sound[m].Values
		var global float64
		for _, v := range values {
			if v.Channel == "G1_wm2" {
				global = v.Value.Mean
			}
		}
		for k := range values {
			if v := &values[k]; global > 150 && (v.Channel == "G1_wm2" || v.Channel == "D1_wm2") {
				extra := 0.25 * swell * global
				v.Value.Mean, v.Value.Min, v.Value.Max = v.Value.Mean+extra, v.Value.Min+extra, v.Value.Max+extra
				lifted++
			}
		}
	}
	if lifted < 1000 {
		t.Fatalf("%d values were lifted", lifted)
	}
	quiet(t, b)
}
