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

// TestQuietWhenSound: sixty days of a sound station raise nothing.
func TestQuietWhenSound(t *testing.T) {
	const days = 60
	for _, s := range soundStands() {
		t.Run(s.name, func(t *testing.T) {
			t.Parallel()
			b := newBed(t, &s, 11, days)
			got := b.judge(nil, 0, days, false, b.soundReading)
			for i := range got.episodes {
				e := &got.episodes[i]
				if err := wellFormed(e); err != nil {
					t.Error(err)
				}
				if e.Severity == rules.Act {
					t.Errorf("false alarm: %s", tell(e))
				}
			}
		})
	}
}
