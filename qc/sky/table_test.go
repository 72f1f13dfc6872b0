package sky

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// TestTableIsTheModel holds the table against the model at the very angle: Bird against its published form, the others against theirs.
func TestTableIsTheModel(t *testing.T) {
	for m := range Model(modelCount) {
		site := NewSite(m, 200, 990)
		rapid.Check(t, func(t *rapid.T) {
			st := drawState(t)
			table := NewTable(site, st)
			z := rapid.Float64Range(0, 89.99).Draw(t, "zenith")
			got, want := table.At(z, math.Cos(z*math.Pi/180), 1361), site.At(z, 1361, &st)
			allowed := 0.25
			if z > 80 {
				allowed = 2
			}
			if math.Abs(got.DirectWm2-want.DirectWm2) > allowed || math.Abs(got.DiffuseWm2-want.DiffuseWm2) > allowed {
				t.Errorf("%s at %v: direct %v diffuse %v, the model has %v and %v", m, z, got.DirectWm2, got.DiffuseWm2, want.DirectWm2, want.DiffuseWm2)
			}
		})
	}
}

// TestBirdNodesAreBird: the nodes, whose pressure goes by a slope and whose aerosol is one number, are Bird's model, up to where its Rayleigh term
// holds.
func TestBirdNodesAreBird(t *testing.T) {
	site := NewSite(BirdHulstrom, 200, 990)
	rapid.Check(t, func(t *rapid.T) {
		st := drawState(t)
		z := rapid.Float64Range(0, 84).Draw(t, "zenith")
		got := site.At(z, 1361, &st)
		want, ok := Bird(BirdInput{ZenithDeg: z, ExtraterrestrialWm2: 1361, PressureHPa: st.PressureHPa, OzoneCm: st.OzoneCm, WaterCm: st.WaterCm,
			AOD500: st.Aerosol / 0.35, Albedo: st.Albedo})
		if !ok || math.Abs(got.DirectWm2-want.DirectWm2) > 0.5 || math.Abs(got.DiffuseWm2-want.DiffuseWm2) > 0.5 {
			t.Errorf("at %v: %v, Bird has %v", z, got, want)
		}
	})
}

func drawState(t *rapid.T) State {
	return State{Aerosol: rapid.Float64Range(0, 0.45).Draw(t, "aerosol"), WaterCm: rapid.Float64Range(0.2, 6).Draw(t, "water"),
		OzoneCm: rapid.Float64Range(0.2, 0.5).Draw(t, "ozone"), Albedo: rapid.Float64Range(0, 0.9).Draw(t, "albedo"),
		PressureHPa: rapid.Float64Range(950, 1030).Draw(t, "pressure")}
}

// TestLawsOfTheSky: more aerosol never gives more direct, a brighter ground never less diffuse, night gives nothing, twilight no beam and
// no more than the horizon, and what is given is never negative.
func TestLawsOfTheSky(t *testing.T) {
	for m := range Model(modelCount) {
		site := NewSite(m, 200, 990)
		rapid.Check(t, func(t *rapid.T) {
			st := drawState(t)
			z := rapid.Float64Range(0, 89.9).Draw(t, "zenith")
			mu := math.Cos(z * math.Pi / 180)
			a := NewTable(site, st).At(z, mu, 1361)
			if !(a.DirectWm2 >= 0 && a.DiffuseWm2 >= 0 && a.GlobalWm2 <= 1361) {
				t.Errorf("%s at %v: %+v", m, z, a)
			}
			hazier := st
			hazier.Aerosol = rapid.Float64Range(st.Aerosol, 0.45).Draw(t, "more aerosol")
			if b := NewTable(site, hazier).At(z, mu, 1361); b.DirectWm2 > a.DirectWm2+1e-3 {
				t.Errorf("%s at %v: aerosol %v gives a beam of %v, %v gives %v", m, z, st.Aerosol, a.DirectWm2, hazier.Aerosol, b.DirectWm2)
			}
			brighter := st
			brighter.Albedo = rapid.Float64Range(st.Albedo, 0.95).Draw(t, "more albedo")
			if b := NewTable(site, brighter).At(z, mu, 1361); b.DiffuseWm2 < a.DiffuseWm2-1e-9 {
				t.Errorf("%s at %v: albedo %v gives diffuse %v, %v gives %v", m, z, st.Albedo, a.DiffuseWm2, brighter.Albedo, b.DiffuseWm2)
			}
			below := rapid.Float64Range(90, 180).Draw(t, "below the horizon")
			edge := NewTable(site, st).At(89.999, 0, 1361)
			if b := NewTable(site, st).At(below, 0, 1361); b.DirectWm2 != 0 || b.DiffuseWm2 > edge.DiffuseWm2+0.05 || below > 96 && b.DiffuseWm2 != 0 {
				t.Errorf("%s at %v: %+v", m, below, b)
			}
		})
	}
}

// TestAerosolIsFoundAgain: the load that a model's beam is made with comes back from it.
func TestAerosolIsFoundAgain(t *testing.T) {
	for m := range Model(modelCount) {
		site := NewSite(m, 200, 990)
		rapid.Check(t, func(t *rapid.T) {
			st := drawState(t)
			st.Aerosol = rapid.Float64Range(0.005, 0.4).Draw(t, "load")
			z := rapid.Float64Range(10, 80).Draw(t, "zenith")
			beam := site.At(z, 1361, &st).DirectWm2
			if got := site.AerosolOf(beam, z, 1361, &st); math.Abs(got-st.Aerosol) > 1e-3 {
				t.Errorf("%s at %v: %v from the beam of %v", m, z, got, st.Aerosol)
			}
		})
	}
}

// TestLearn: the mean of nothing is the default; a load seen yesterday counts nearly in full, one of a month ago hardly; the spread widens
// with age; a station whose dirt takes 20 % of global learns no more of it than calibrations allow; what is of today or later teaches nothing.
func TestLearn(t *testing.T) {
	fit := func(day int64, aerosol float64) DayFit {
		return DayFit{Day: day, Minutes: 200, LogAerosol: LogOf(aerosol), DiffuseGain: 1.1}
	}
	none := Learn(100, nil, 0.1, math.NaN())
	fresh := Learn(100, []DayFit{fit(98, 0.1), fit(99, 0.3)}, 0.1, 0.8)
	old := Learn(100, []DayFit{fit(79, 0.1), fit(80, 0.3)}, 0.1, 0.99)
	for _, c := range []struct {
		name           string
		got, low, high float64
	}{
		{"default load", none.Aerosol, 0.0999, 0.1001}, {"default gain", none.DiffuseGain, 1, 1}, {"default closure", none.GlobalGain, 1, 1},
		{"load of yesterday", fresh.Aerosol, 0.2, 0.28}, {"load of long ago", old.Aerosol, 0.12, 0.18}, {"diffuse", fresh.DiffuseGain, 1.05, 1.1},
		{"dirt on global", fresh.GlobalGain, 0.97, 0.97}, {"closure", old.GlobalGain, 0.99, 0.99},
		{"spread of one day", fresh.LogSpread, 0.4, 0.5}, {"spread of three weeks", old.LogSpread, 0.6, 0.62},
	} {
		if !(c.got >= c.low && c.got <= c.high) {
			t.Errorf("%s: %v, want %v to %v", c.name, c.got, c.low, c.high)
		}
	}
	if same := Learn(100, []DayFit{fit(69, 0.9), fit(98, 0.1), fit(99, 0.3), fit(100, 0.7), fit(101, 0.8)}, 0.1, 0.8); same != fresh {
		t.Errorf("days that may not count count: %+v, want %+v", same, fresh)
	}
	if low, high := fresh.AerosolBand(2); !(low < fresh.Aerosol && fresh.Aerosol < high) {
		t.Errorf("band %v to %v about %v", low, high, fresh.Aerosol)
	}
}

// TestDirtIsNotAerosol: a beam that a dirty window lowers by 5 % while the diffuse stays looks like more aerosol than a haze whose diffuse rises
// with it, but some of it is not taken for air.
func TestDirtIsNotAerosol(t *testing.T) {
	site := NewSite(BirdHulstrom, 0, 1013.25)
	st := DefaultState(1013.25)
	clean := site.At(40, 1361, &st)
	of := func(direct, diffuse float64) float64 {
		x := st
		x.Aerosol = site.AerosolOf(direct, 40, 1361, &st)
		y := x
		y.Aerosol += 0.02
		return Together(x.Aerosol, 0.02, site.At(40, 1361, &x), site.At(40, 1361, &y), 1, diffuse)
	}
	haze := st
	haze.Aerosol = site.AerosolOf(0.95*clean.DirectWm2, 40, 1361, &st)
	hazy := site.At(40, 1361, &haze)
	if got := of(hazy.DirectWm2, hazy.DiffuseWm2); math.Abs(got-haze.Aerosol) > 1e-3 {
		t.Errorf("haze of %v is taken for %v", haze.Aerosol, got)
	}
	dirty := of(0.95*clean.DirectWm2, clean.DiffuseWm2)
	if taken := (dirty - st.Aerosol) / (haze.Aerosol - st.Aerosol); !(taken > 0 && taken < 0.75) {
		t.Errorf("of a dirty window's loss %.2f is taken for aerosol, want less than three quarters", taken)
	}
}

// TestLongwaveClear holds the tabulated form against the formula.
func TestLongwaveClear(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		air, humidity := rapid.Float64Range(-44, 59).Draw(t, "air"), rapid.Float64Range(2, 105).Draw(t, "humidity")
		got, want := LongwaveClear(air, humidity), LongwavePrata(air+273.15, VapourPressure(air, humidity))
		if math.IsNaN(got) && math.Abs(VapourPressure(air, humidity)-100) < 1e-3 {
			return // on the edge of what both take
		}
		if !(math.Abs(got-want) < 1e-3) && !(math.IsNaN(got) && math.IsNaN(want)) {
			t.Errorf("%v degrees C, %v %%: %v, the formula has %v", air, humidity, got, want)
		}
	})
	for _, c := range [][2]float64{{-46, 50}, {61, 50}, {10, -1}, {10, 106}, {math.NaN(), 50}, {10, math.NaN()}} {
		if got := LongwaveClear(c[0], c[1]); !math.IsNaN(got) {
			t.Errorf("%v: %v, want no value", c, got)
		}
	}
}
