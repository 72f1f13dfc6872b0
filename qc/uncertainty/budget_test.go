package uncertainty

import (
	"math"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: %.9f, want %.9f within %g", what, got, want, tolerance)
	}
}

// classAByDigits is a global of class A whose logger converts, calibrated to 1.2 % (k=2).
func classAByDigits() *Budget {
	in := &rules.Instrument{ID: "G1", Measures: rules.Global, Class: "A", Input: rules.Input{Irradiance: "ghi"}}
	return NewBudget(in, &rules.Calibration{UncertaintyPercent: 1.2, K2: 1, Scale: "WRR"})
}

// sunAtZenith is 1000 W/m2 of beam from straight above, a year after the calibration, with a net longwave that nobody measured.
func sunAtZenith() Conditions {
	nan := math.NaN()
	return Conditions{Value: 1000, SD: nan, Years: 1, BeamWm2: 1000, CosZenith: 1, NetWm2: nan, BodyC: nan, DomeC: nan}
}

// TestGUMExample: the measurement equation of ASTM G213-17 (from memory) with the inputs V 8000 uV, R 8 (2 %, k=2), Rnet 0.04 (25 %,
// rectangular), Wnet -150 (5 W/m2, rectangular); the expected numbers were worked out by hand from the partial derivatives.
func TestGUMExample(t *testing.T) {
	m := InfraredCorrected{8000, 8, 0.04, -150}
	near(t, "irradiance", m.IrradianceWm2(), 1000.75, 1e-9)
	near(t, "as the sensor's own", sensor.NetInfraredCorrection(8000, 8, 0.04, -150), m.IrradianceWm2(), 0)
	c := m.Contributions(InfraredCorrected{1, Normal.Standard(0.02 * 8), Rectangular.Standard(0.25 * 0.04), Rectangular.Standard(5)})
	for i, want := range [...]float64{0.125, -10.0075, 0.108253, -0.014434} {
		near(t, "contribution", c[i], want, 5e-7)
	}
	combined := Combine(c[:]...)
	near(t, "combined", combined, 10.008876, 5e-7)
	near(t, "expanded", CoverageNormal95*combined, 19.617398, 1e-5)
}

// TestContributionsAreTheDerivatives holds the partial derivatives against differences of the equation.
func TestContributionsAreTheDerivatives(t *testing.T) {
	m := InfraredCorrected{8000, 8, 0.04, -150}
	const h = 1e-6
	for i, step := range [...]InfraredCorrected{{VoltageUV: h}, {SensitivityUVPerWm2: h}, {NetSensitivityUVPerWm2: h}, {NetWm2: h}} {
		up := InfraredCorrected{m.VoltageUV + step.VoltageUV, m.SensitivityUVPerWm2 + step.SensitivityUVPerWm2,
			m.NetSensitivityUVPerWm2 + step.NetSensitivityUVPerWm2, m.NetWm2 + step.NetWm2}
		near(t, "derivative", m.Contributions(step)[i]/h, (up.IrradianceWm2()-m.IrradianceWm2())/h, 1e-3)
	}
}

func TestDistributions(t *testing.T) {
	near(t, "normal", Normal.Standard(6), 3, 0)
	near(t, "rectangular", Rectangular.Standard(3), math.Sqrt(3), 1e-15)
	near(t, "triangular", Triangular.Standard(6), math.Sqrt(6), 1e-15)
	near(t, "measured", Measured.Standard(6), 6, 0)
}

// TestClassA: the limits of ISO 9060:2018 class A (from memory) at 1000 W/m2, all rectangular: 7, 2, 8, 5, 10, 5, 10, 5, 2 W/m2 have the root
// sum of squares sqrt(396/3) = 11.489125; with a calibration of 1.2 % (6 W/m2 of standard uncertainty) sqrt(132+36) = 12.961481,
// and 1.96 times that is 25.404504.
func TestClassA(t *testing.T) {
	b, c := classAByDigits(), sunAtZenith()
	var class []float64
	for _, row := range b.Components(&c) {
		if row.Name != "calibration" {
			class = append(class, row.Standard)
		}
	}
	near(t, "class limits", Combine(class...), 11.489125, 5e-7)
	near(t, "with calibration", b.Standard(&c), 12.961481, 5e-7)
	near(t, "expanded, normal 95 %", CoverageNormal95*b.Standard(&c), 25.404504, 1e-6)
	near(t, "expanded, k=2", b.U95(&c), 2*math.Sqrt(168), 1e-12)
}

// TestDirectionalGrowsWithTheBeam: 10 W/m2 at 1000 of beam wherever it comes from; not with the cosine, and not where no beam is.
func TestDirectionalGrowsWithTheBeam(t *testing.T) {
	b := classAByDigits()
	for _, x := range []struct{ beam, mu, want float64 }{{1000, 1, 10}, {1000, 0.1, 10}, {500, 0.1, 5}, {0, 0.5, 0}} {
		c := sunAtZenith()
		c.BeamWm2, c.CosZenith, c.Value = x.beam, x.mu, 100+x.beam*x.mu
		near(t, "directional", named(t, b, &c, "directional response, beam"), x.want/math.Sqrt(3), 1e-12)
	}
	// levelling: 900 W/m2 of beam at 60 degrees meet a plane off by 0.2 degrees: 900 * 0.866025 * 0.00349066 = 2.720699
	c := sunAtZenith()
	c.BeamWm2, c.CosZenith = 900, 0.5
	near(t, "levelling", named(t, b, &c, "levelling"), 2.720699/math.Sqrt(3), 1e-6)
	// an even sky of 100 W/m2: 2 * 1 % of it, triangular
	c.BeamWm2, c.Value = 0, 100
	near(t, "sky", named(t, b, &c, "directional response, sky"), 2/math.Sqrt(6), 1e-12)
}

func named(t *testing.T, b *Budget, c *Conditions, name string) float64 {
	t.Helper()
	for _, row := range b.Components(c) {
		if row.Name == name {
			return row.Standard
		}
	}
	t.Fatalf("no component %q", name)
	return 0
}

func has(b *Budget, words string) bool {
	c := sunAtZenith()
	for _, row := range b.Components(&c) {
		if strings.Contains(row.Name+": "+row.Source, words) {
			return true
		}
	}
	return false
}

func TestZeroOffsetFollowsTheNetLongwave(t *testing.T) {
	b, c := classAByDigits(), sunAtZenith()
	for _, x := range []struct{ net, want float64 }{{math.NaN(), 7}, {-200, 7}, {-100, 3.5}, {0, 0}} {
		c.NetWm2 = x.net
		near(t, "zero offset a", named(t, b, &c, "zero offset a"), x.want/math.Sqrt(3), 1e-12)
	}
	corrected := NewBudget(&rules.Instrument{Measures: rules.Global, Class: "A", Input: rules.Input{Irradiance: "ghi"}}, &rules.Calibration{ZeroWm2: -2})
	c.NetWm2 = -200
	near(t, "zero taken off", named(t, corrected, &c, "zero offset a"), 3.5/math.Sqrt(3), 1e-12)
}

func TestWhatIsSaid(t *testing.T) {
	pyrgeometer := func(shaded bool, dome string, k3 float64, scale string) *Budget {
		in := &rules.Instrument{Measures: rules.LWDown, Shaded: shaded, Input: rules.Input{Signal: "l", SignalUnit: "mV", Case: "c", Dome: dome}}
		return NewBudget(in, &rules.Calibration{SensitivityUVPerW: 4, K2: 1, K3: k3, Scale: scale})
	}
	for _, x := range []struct {
		what  string
		b     *Budget
		words string
		want  bool
	}{
		{"unclassified", NewBudget(&rules.Instrument{Measures: rules.Global}, nil), "class C (not classified)", true},
		{"classified", classAByDigits(), "not classified", false},
		{"no certificate", NewBudget(&rules.Instrument{Measures: rules.Global}, nil), "calibration: assumed 5 %", true},
		{"certificate", classAByDigits(), "calibration: certificate 1.2 %", true},
		{"shaded", pyrgeometer(true, "d", 3, "SI"), "unshaded", false},
		{"unshaded", pyrgeometer(false, "d", 3, "SI"), "unshaded", true},
		{"dome taken out", pyrgeometer(true, "d", 3, "SI"), "uncoupled dome", false},
		{"uncoupled dome", pyrgeometer(true, "d", 0, "SI"), "uncoupled dome", true},
		{"coupled dome", pyrgeometer(true, "", 0, "SI"), "taken as coupled", true},
		{"dome taken out by the logger", NewBudget(&rules.Instrument{Measures: rules.LWDown, Input: rules.Input{Irradiance: "l", Case: "c", Dome: "d"}}, nil), "dome temperature", true},
		{"dome not taken out by the logger", NewBudget(&rules.Instrument{Measures: rules.LWDown, Input: rules.Input{Irradiance: "l", Case: "c", Dome: "d"}}, nil), "not taken out", false},
		{"SI", pyrgeometer(true, "", 0, "SI"), "scale", false},
		{"WISG", pyrgeometer(true, "", 0, "WISG"), "scale: WISG", true},
		{"no scale", pyrgeometer(true, "", 0, ""), "scale: not stated", true},
		{"pyrheliometer", NewBudget(&rules.Instrument{Measures: rules.Direct, Class: "AA"}, nil), "class AA, limits assumed", true},
		{"pyrheliometer sees no cosine", NewBudget(&rules.Instrument{Measures: rules.Direct, Class: "AA"}, nil), "directional", false},
		{"upwelling is shaded by itself", NewBudget(&rules.Instrument{Measures: rules.LWUp}, nil), "unshaded", false},
	} {
		if has(x.b, x.words) != x.want {
			t.Errorf("%s: says %q is %v, want %v", x.what, x.words, !x.want, x.want)
		}
	}
}

// TestPyrgeometer: hand-worked at -100 W/m2 of net signal and 288.15 K, where sigma T^4 is 390.918508 and 4 sigma T^3 5.426597 W/(m2 K).
func TestPyrgeometer(t *testing.T) {
	in := &rules.Instrument{Measures: rules.LWDown, Input: rules.Input{Signal: "l", SignalUnit: "mV", Case: "c", Dome: "d"}}
	b := NewBudget(in, &rules.Calibration{SensitivityUVPerW: 4, UncertaintyPercent: 3, K2: 1, K3: 3, Scale: "WISG"})
	c := Conditions{Value: 290.92, SD: math.NaN(), Years: 2, BeamWm2: 800, NetWm2: -100, BodyC: 15, DomeC: 15}
	root3 := math.Sqrt(3)
	for name, want := range map[string]float64{
		"calibration": 1.5, "non-stability since the calibration": 2 / root3, "body temperature": 0.2 * 4 * 5.426597 / root3,
		"dome temperature": 0.2 * 3 * 5.426597 / root3, "unshaded: sun on the dome": 2.6 * 0.8 / root3, "scale": 6 / root3,
		"emission of the body, k2": 390.918508 * 0.0008 / root3, "emission of the dome, k3": 0, "logger, offset": 1.25 / root3,
	} {
		near(t, name, named(t, b, &c, name), want, 1e-6)
	}
	c.NetWm2 = -25 // an overcast sky
	near(t, "scale under cloud", named(t, b, &c, "scale"), 1.5/root3, 1e-12)
}

func TestMinuteSampling(t *testing.T) {
	b, c := classAByDigits(), sunAtZenith()
	alone := b.Standard(&c)
	c.SD, c.N = 60, 36
	near(t, "60 W/m2 over 36 samples", b.Standard(&c), math.Sqrt(alone*alone+100), 1e-9)
	c.N = 1
	near(t, "one sample", b.Standard(&c), alone, 0)
}

func TestRestoredIsLarger(t *testing.T) {
	b, c := classAByDigits(), sunAtZenith()
	// 20 W/m2 taken off: plus or minus 1 + 5 W/m2
	near(t, "zero offset taken off", b.Restored(&c, -20), 2*math.Sqrt(168+36.0/3), 1e-9)
	if b.Restored(&c, 0) <= b.U95(&c) {
		t.Error("a value put right by its sign is as certain as one that never was wrong")
	}
}

// TestTarget: WMO/TD-No. 1274, Table 2.1; 5 and 12 W/m2 are worked by hand.
func TestTarget(t *testing.T) {
	for _, x := range []struct {
		q           rules.Quantity
		value, want float64
	}{{rules.Global, 100, 5}, {rules.Global, 600, 12}, {rules.Direct, 800, 4}, {rules.Direct, 100, 1.5}, {rules.Diffuse, 100, 3},
		{rules.LWDown, 300, 6}, {rules.Reflected, 100, 3}} {
		got, ok := Target(x.q, x.value)
		if !ok {
			t.Errorf("%s: no target", x.q)
		}
		near(t, x.q.String(), got, x.want, 1e-12)
	}
	if _, ok := Target(rules.UV, 10); ok {
		t.Error("uv has a target")
	}
}

// TestBeamOfGlobal: Erbs et al. 1982 (from memory), worked by hand.
func TestBeamOfGlobal(t *testing.T) {
	near(t, "kt 0.7", erbsDiffuseShare(0.7), 0.243980, 5e-7)
	near(t, "kt 0.22 joins", 1-0.09*0.22, erbsDiffuseShare(0.2200001), 2e-3)
	near(t, "kt 0.7 at 60 degrees", BeamOfGlobal(0.7*1360*0.5, 0.5, 1360), 0.7*1360*(1-0.24397960), 1e-6)
	near(t, "overcast", BeamOfGlobal(100, 0.8, 1360), 0.09*(100/(0.8*1360))*100/0.8, 1e-9)
	for _, g := range []float64{math.NaN(), -3, 0} {
		near(t, "no global", BeamOfGlobal(g, 0.5, 1360), 0, 0)
	}
	near(t, "night", BeamOfGlobal(3, 0, 1360), 0, 0)
	near(t, "grazing", BeamOfGlobal(500, 0.05, 1360), 1360, 0)
	near(t, "by night at most", BeamAtMost(0, 1360), 0, 0)
}

var anyQuantity = rapid.SampledFrom([]rules.Quantity{rules.Global, rules.Direct, rules.Diffuse, rules.Reflected, rules.LWDown, rules.LWUp, rules.UV, rules.PAR})

func anyBudget(t *rapid.T) *Budget {
	in := &rules.Instrument{Measures: anyQuantity.Draw(t, "quantity"), Class: rapid.SampledFrom([]string{"", "AA", "A", "B", "C"}).Draw(t, "class"),
		Shaded: rapid.Bool().Draw(t, "shaded")}
	if rapid.Bool().Draw(t, "voltage") {
		in.Input = rules.Input{Signal: "s", SignalUnit: "mV", Case: "c", Dome: rapid.SampledFrom([]string{"", "d"}).Draw(t, "dome")}
	}
	if rapid.Bool().Draw(t, "uncalibrated") {
		return NewBudget(in, nil)
	}
	return NewBudget(in, &rules.Calibration{SensitivityUVPerW: rapid.Float64Range(1, 50).Draw(t, "sensitivity"), K2: 1, K3: rapid.Float64Range(0, 4).Draw(t, "k3"),
		UncertaintyPercent: rapid.Float64Range(0, 20).Draw(t, "percent"), Scale: rapid.SampledFrom([]string{"", "WRR", "WISG", "SI"}).Draw(t, "scale"),
		ZeroWm2: rapid.SampledFrom([]float64{0, -3}).Draw(t, "zero")})
}

func conditions(t *rapid.T, any *rapid.Generator[float64], sunny bool) Conditions {
	orNaN := func(name string) float64 {
		if rapid.Bool().Draw(t, name+" known") {
			return any.Draw(t, name)
		}
		return math.NaN()
	}
	c := Conditions{Value: any.Draw(t, "value"), SD: orNaN("sd"), N: rapid.Uint32().Draw(t, "n"), Years: rapid.Float64Range(0, 50).Draw(t, "years"),
		NetWm2: orNaN("net"), BodyC: orNaN("body"), DomeC: orNaN("dome")}
	if sunny {
		c.CosZenith, c.BeamWm2 = rapid.Float64Range(0, 1).Draw(t, "cosine"), orNaN("beam")
	}
	return c
}

// TestFiniteAndNotNegative: whatever finite numbers come in.
func TestFiniteAndNotNegative(t *testing.T) {
	finite := rapid.Float64().Filter(func(v float64) bool { return !math.IsInf(v, 0) && !math.IsNaN(v) })
	rapid.Check(t, func(t *rapid.T) {
		b, c := anyBudget(t), conditions(t, finite, true)
		for _, u := range []float64{b.Standard(&c), b.U95(&c), b.Restored(&c, finite.Draw(t, "correction"))} {
			if !(u >= 0) || math.IsInf(u, 0) {
				t.Fatalf("uncertainty %v of %+v", u, c)
			}
		}
		c.Value = math.NaN()
		if u := b.U95(&c); !math.IsNaN(u) {
			t.Fatalf("uncertainty %v of nothing", u)
		}
	})
}

// TestTableIsWhatIsStored: the rows of the table combine to the number of the fast way.
func TestTableIsWhatIsStored(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b, c := anyBudget(t), conditions(t, rapid.Float64Range(-200, 1500), true)
		sum := 0.0
		for _, row := range b.Components(&c) {
			if !(row.Standard >= 0) || row.Name == "" || row.Source == "" {
				t.Fatalf("row %+v", row)
			}
			sum += row.Standard * row.Standard
		}
		if fast := b.Standard(&c); math.Abs(fast-math.Sqrt(sum)) > 1e-9*(1+fast) {
			t.Fatalf("%v by the table, %v by the fast way: %+v", math.Sqrt(sum), fast, c)
		}
	})
}

// TestGrowsWithIrradiance: nothing makes a larger shortwave value more certain than a smaller one under the same conditions, nor an older
// calibration better, nor more beam where the value grows with it.
func TestGrowsWithIrradiance(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b, c := anyBudget(t), conditions(t, rapid.Float64Range(0, 1500), true)
		before := b.Standard(&c)
		more := c
		more.Value += rapid.Float64Range(0, 500).Draw(t, "more")
		if b.Standard(&more) < before*(1-1e-12) {
			t.Fatalf("%v at %v W/m2, %v at %v", before, c.Value, b.Standard(&more), more.Value)
		}
		older := c
		older.Years += rapid.Float64Range(0, 20).Draw(t, "older")
		if b.Standard(&older) < before*(1-1e-12) {
			t.Fatalf("%v after %v years, %v after %v", before, c.Years, b.Standard(&older), older.Years)
		}
		if c.BeamWm2 != c.BeamWm2 {
			return
		}
		sunnier := c
		extra := rapid.Float64Range(0, 500).Draw(t, "sunnier")
		sunnier.BeamWm2 += extra
		sunnier.Value += extra * c.CosZenith
		if b.Standard(&sunnier) < before*(1-1e-12) {
			t.Fatalf("%v at a beam of %v W/m2, %v at %v", before, c.BeamWm2, b.Standard(&sunnier), sunnier.BeamWm2)
		}
	})
}

// TestWorseClassIsWorse: A is never less certain than B, nor B than C.
func TestWorseClassIsWorse(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		q := rapid.SampledFrom([]rules.Quantity{rules.Global, rules.Direct, rules.Diffuse, rules.Reflected}).Draw(t, "quantity")
		c := conditions(t, rapid.Float64Range(0, 1500), true)
		last := 0.0
		for _, class := range []string{"A", "B", "C"} {
			u := NewBudget(&rules.Instrument{Measures: q, Class: class}, nil).Standard(&c)
			if u < last {
				t.Fatalf("class %s: %v, the better one %v", class, u, last)
			}
			last = u
		}
	})
}

var sink float64

func BenchmarkStandard(b *testing.B) {
	for _, x := range []struct {
		name string
		b    *Budget
	}{{"shortwave", classAByDigits()}, {"longwave", NewBudget(&rules.Instrument{Measures: rules.LWDown}, nil)}} {
		b.Run(x.name, func(b *testing.B) {
			c := sunAtZenith()
			c.SD, c.N, c.BodyC = 4, 60, 15
			b.ReportAllocs()
			for i := range b.N {
				c.Value = float64(i & 1023)
				sink += x.b.U95(&c)
			}
		})
	}
}
