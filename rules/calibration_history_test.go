package rules

import (
	"fmt"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// For any history: it loads just when its periods, sorted, follow one another without overlap, hole or reversal, and then each
// instant from the first start to the last end lies in exactly one of them.
func TestCalibrationHistories(t *testing.T) {
	day := func(n int) time.Time { return time.Date(2026, 1, 1+n, 0, 0, 0, 0, time.UTC) }
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 4).Draw(t, "periods")
		from, to := make([]int, n), make([]int, n)
		var text strings.Builder
		text.WriteString("network: {id: n}\nstations:\n  - {id: s, latitude: 1, longitude: 1, elevation: 1, instruments: [{id: G, measures: global, input: {signal: g, unit: mV}, calibrations: [\n")
		for i := range n {
			from[i], to[i] = rapid.IntRange(0, 6).Draw(t, "from"), rapid.IntRange(-1, 7).Draw(t, "to") // -1 is open
			end := ""
			if to[i] >= 0 {
				end = ", to: " + day(to[i]).Format(time.DateOnly)
			}
			fmt.Fprintf(&text, "    {from: %s%s, sensitivity: %d, unit: uV/(W/m2)},\n", day(from[i]).Format(time.DateOnly), end, 2+i)
		}
		text.WriteString("  ]}]}\n")

		sound := true
		for i := range n {
			if to[i] >= 0 && to[i] <= from[i] {
				sound = false
			}
			next := -1 // the nearest other start that is not before this one
			for k := range n {
				if k != i && from[k] >= from[i] && (next < 0 || from[k] < next) {
					next = from[k]
				}
			}
			if next == from[i] || next >= 0 && to[i] >= 0 && to[i] != next {
				sound = false
			}
		}
		site, err := Parse("x", []byte(text.String()))
		if (err == nil) != sound {
			t.Fatalf("sound is %v, the reader says %v of\n%s", sound, err, text.String())
		}
		if err != nil {
			return
		}
		cals := site.Stations[0].Instruments[0].Calibrations
		last := cals[len(cals)-1].To
		for at := cals[0].From; at.Before(day(8)) && (last.IsZero() || at.Before(last)); at = at.Add(12 * time.Hour) {
			holding := 0
			for _, c := range cals {
				if !at.Before(c.From) && (c.To.IsZero() || at.Before(c.To)) {
					holding++
				}
			}
			if holding != 1 {
				t.Fatalf("%d calibrations hold at %s in\n%s", holding, at, text.String())
			}
		}
	})
}

func TestSaltpanAndCoralkey(t *testing.T) {
	site, err := Load(filepath.Join(siteFolder, "saltpan.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	st := site.Stations[0]
	if st.Time.LabelEnd || st.Time.Interval != 10*time.Second || st.Sky.Model != "solis" || st.Sky.WaterCm != 0.6 || !(st.Sky.OzoneCm != st.Sky.OzoneCm) {
		t.Errorf("time or sky: %+v %+v", st.Time, st.Sky)
	}
	if l := st.Instruments[4]; l.Calibrations[0].Serial != "0417" || l.Input.CaseUnit != "ohm_10k" {
		t.Errorf("a serial with a leading zero, or ohms: %+v", l)
	}
	if w := st.Weather; w[0].Unit != "K" || w[1].Unit != "1" || w[2].Unit != "Pa" {
		t.Errorf("weather units: %+v", w)
	}
	if st.Limits.RareLW[1].High != 750 {
		t.Errorf("rare.lw_up.high: %g", st.Limits.RareLW[1].High)
	}
	if site, err = Load(filepath.Join(siteFolder, "coralkey.yaml")); err != nil {
		t.Fatal(err)
	}
	if q := site.Station("coralkey").Instruments[2]; q.Measures != PAR || q.Calibrations[0].SensitivityUVPerW != 6.1 {
		t.Errorf("par: %+v", q)
	}
	if z := site.Station("frostbight").Instruments[0].Calibrations[0].ZeroWm2; z != -1.5 {
		t.Errorf("zero: %g", z)
	}
}
