package radiation

import (
	"math"
	"testing"

	"fluxwarden/rules"

	"pgregory.net/rapid"
)

func ok(v float64) Part { return Part{v, rules.Accepted} }

// TestSurface works a noon, a night and a station with a pyranometer only by hand.
func TestSurface(t *testing.T) {
	noon := Minute{Global: ok(600), Direct: ok(800), Diffuse: ok(120), Reflected: ok(150), LWDown: ok(300), LWUp: Part{400, rules.Questioned},
		AirTemperature: ok(15), ApparentZenithDeg: 60, ExtraterrestrialWm2: 1361, ClearGlobalWm2: 620, ClearLWDownWm2: 280}
	night := noon
	night.ApparentZenithDeg, night.Global, night.Direct, night.Diffuse, night.Reflected = 110, ok(-2), ok(0), ok(-1), ok(-1)
	night.ClearGlobalWm2 = 0
	alone := Minute{Global: ok(600), Direct: None(), Diffuse: None(), Reflected: None(), LWDown: None(), LWUp: None(), AirTemperature: None(),
		ApparentZenithDeg: 60, ExtraterrestrialWm2: 1361, ClearGlobalWm2: math.NaN(), ClearLWDownWm2: math.NaN()}
	for _, c := range []struct {
		name string
		in   *Minute
		of   func(*Budget) Part
		want Part
	}{
		{"net shortwave", &noon, func(b *Budget) Part { return b.NetShortwave }, ok(450)},
		{"net longwave", &noon, func(b *Budget) Part { return b.NetLongwave }, Part{-100, rules.Questioned}},
		{"net", &noon, func(b *Budget) Part { return b.Net }, Part{350, rules.Questioned}},
		{"albedo", &noon, func(b *Budget) Part { return b.Albedo }, ok(0.25)},
		{"diffuse fraction", &noon, func(b *Budget) Part { return b.DiffuseFraction }, ok(0.2)},
		{"clearness", &noon, func(b *Budget) Part { return b.ClearnessIndex }, ok(600 / 680.5)},
		{"sunshine", &noon, func(b *Budget) Part { return b.Sunshine }, ok(1)},
		{"cloud global", &noon, func(b *Budget) Part { return b.CloudGlobal }, ok(-20)},
		{"cloud longwave", &noon, func(b *Budget) Part { return b.CloudLongwave }, ok(20)},
		{"cloud net", &noon, func(b *Budget) Part { return b.CloudNet }, ok(5)},
		{"emissivity", &noon, func(b *Budget) Part { return b.SkyEmissivity }, ok(0.7674211)}, // 300/(5.670374419e-8 288.15^4)
		{"sky temperature", &noon, func(b *Budget) Part { return b.SkyTemperatureC }, ok(269.6978 - 273.15)},
		{"night sunshine", &night, func(b *Budget) Part { return b.Sunshine }, ok(0)},
		{"night albedo", &night, func(b *Budget) Part { return b.Albedo }, None()},
		{"night clearness", &night, func(b *Budget) Part { return b.ClearnessIndex }, None()},
		{"night cloud net", &night, func(b *Budget) Part { return b.CloudNet }, ok(20)},
		{"pyranometer alone: net", &alone, func(b *Budget) Part { return b.Net }, None()},
		{"pyranometer alone: sunshine", &alone, func(b *Budget) Part { return b.Sunshine }, None()},
		{"pyranometer alone: clearness", &alone, func(b *Budget) Part { return b.ClearnessIndex }, ok(600 / 680.5)},
		{"pyranometer alone: cloud", &alone, func(b *Budget) Part { return b.CloudGlobal }, None()},
	} {
		b := Surface(c.in)
		got := c.of(&b)
		if got.Verdict != c.want.Verdict || !(math.Abs(got.Value-c.want.Value) < 2e-4) && !(math.IsNaN(got.Value) && math.IsNaN(c.want.Value)) {
			t.Errorf("%s: %v %s, want %v %s", c.name, got.Value, got.Verdict, c.want.Value, c.want.Verdict)
		}
	}
}

// TestSunshineWithoutDirect: 120 W/m2 of beam is the edge (WMO-No. 8), measured or worked out of the other two.
func TestSunshineWithoutDirect(t *testing.T) {
	for _, c := range []struct {
		direct          Part
		global, diffuse float64
		want            Part
	}{
		{ok(120), 100, 50, ok(1)},
		{ok(119.98), 300, 50, ok(0)},
		{None(), 111, 50, ok(1)}, // (111-50)/cos 60 = 122
		{None(), 109, 50, ok(0)},
		{Part{700, rules.Rejected}, 109, 50, ok(0)},
	} {
		b := Surface(&Minute{Direct: c.direct, Global: ok(c.global), Diffuse: ok(c.diffuse), Reflected: None(), LWDown: None(), LWUp: None(),
			AirTemperature: None(), ApparentZenithDeg: 60, ExtraterrestrialWm2: 1361})
		if b.Sunshine != c.want {
			t.Errorf("direct %v, global %v, diffuse %v: %v, want %v", c.direct, c.global, c.diffuse, b.Sunshine, c.want)
		}
	}
}

func TestBest(t *testing.T) {
	rejected := Part{1, rules.Rejected}
	for _, c := range []struct {
		global, direct, diffuse Part
		want                    float64
		from                    Source
	}{
		{ok(610), ok(800), ok(200), 600, FromParts},
		{ok(610), rejected, ok(200), 610, FromUnshaded},
		{None(), ok(800), ok(200), 600, FromParts},
		{ok(610), None(), ok(200), 610, FromUnshaded},
		{None(), None(), ok(200), math.NaN(), FromNothing},
	} {
		got, from := Best(c.global, c.direct, c.diffuse, 60)
		if from != c.from || !(math.Abs(got.Value-c.want) < 1e-9) && !math.IsNaN(c.want) {
			t.Errorf("%v %v %v: %v from %d, want %v from %d", c.global, c.direct, c.diffuse, got, from, c.want, c.from)
		}
	}
}

// TestVerdictsComeFromTheParents: no derived value is better than its worst parent, and absent goes with NaN.
func TestVerdictsComeFromTheParents(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		part := func(name string, low, high float64) Part {
			return Of(rapid.Float64Range(low, high).Draw(t, name), rules.Verdict(rapid.IntRange(0, rules.VerdictCount-1).Draw(t, name+" verdict")))
		}
		m := Minute{Global: part("global", -5, 1400), Direct: part("direct", -5, 1100), Diffuse: part("diffuse", -5, 700), Reflected: part("reflected", -5, 900),
			LWDown: part("lw_down", 100, 500), LWUp: part("lw_up", 150, 700), AirTemperature: part("air", -60, 50),
			ApparentZenithDeg: rapid.Float64Range(0, 180).Draw(t, "zenith"), ExtraterrestrialWm2: 1361,
			ClearGlobalWm2: rapid.Float64Range(0, 1100).Draw(t, "clear"), ClearLWDownWm2: rapid.Float64Range(100, 450).Draw(t, "clear lw")}
		b := Surface(&m)
		check := func(name string, p Part, parents ...Part) {
			if (p.Verdict == rules.Absent) != math.IsNaN(p.Value) {
				t.Errorf("%s: %v is %s", name, p.Value, p.Verdict)
			}
			for _, q := range parents {
				if p.Verdict != rules.Absent && (q.Verdict == rules.Absent || q.Verdict > p.Verdict) {
					t.Errorf("%s is %s and a parent %s", name, p.Verdict, q.Verdict)
				}
			}
		}
		check("net shortwave", b.NetShortwave, m.Global, m.Reflected)
		check("net longwave", b.NetLongwave, m.LWDown, m.LWUp)
		check("net", b.Net, m.Global, m.Reflected, m.LWDown, m.LWUp)
		check("albedo", b.Albedo, m.Global, m.Reflected)
		check("clearness index", b.ClearnessIndex, m.Global)
		check("diffuse fraction", b.DiffuseFraction, m.Global, m.Diffuse)
		check("emissivity", b.SkyEmissivity, m.LWDown, m.AirTemperature)
		check("sky temperature", b.SkyTemperatureC, m.LWDown)
		check("cloud longwave", b.CloudLongwave, m.LWDown)
		check("cloud net", b.CloudNet, b.CloudLongwave)
		check("sunshine", b.Sunshine)
	})
}
