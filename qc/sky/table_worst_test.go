package sky

import (
	"math"
	"testing"
)

// The worst that the table does, on a grid of states, stays within what it says: chance alone finds the corners too rarely.
func TestTheTablesWorst(t *testing.T) {
	for m := range Model(modelCount) {
		site := NewSite(m, 200, 990)
		worst := [2]float64{}
		for _, aerosol := range []float64{0, 0.01, 0.05, 0.2, 0.45} {
			for _, water := range []float64{0.2, 1, 6} {
				for _, pressure := range []float64{950, 1030} {
					for _, albedo := range []float64{0, 0.9} {
						st := State{Aerosol: aerosol, WaterCm: water, OzoneCm: 0.3, Albedo: albedo, PressureHPa: pressure}
						table := NewTable(site, st)
						for z := 0.05; z < 89.995; z += 0.15 {
							got, want := table.At(z, math.Cos(z*math.Pi/180), 1361), site.At(z, 1361, &st)
							k := 0
							if z > 80 {
								k = 1
							}
							worst[k] = max(worst[k], math.Abs(got.DirectWm2-want.DirectWm2), math.Abs(got.DiffuseWm2-want.DiffuseWm2))
						}
					}
				}
			}
		}
		t.Logf("%s: %.3f W/m2 up to 80 degrees, %.3f beyond", m, worst[0], worst[1])
		if worst[0] > 0.25 || worst[1] > 2 {
			t.Errorf("%s is off by %g W/m2 up to 80 degrees and %g beyond; 0.25 and 2 are allowed", m, worst[0], worst[1])
		}
	}
}
