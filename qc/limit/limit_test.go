package limit

import (
	"math"
	"testing"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

var nan = math.NaN()

// sunAt is the sun at a zenith angle in degrees, airless and apparent the same, at a distance of 1 AU with a solar constant of
// 1361 W/m2: what the hand-worked points are stated for.
func sunAt(zenithDeg float64) *Sun {
	mu := exact.Cos(zenithDeg * (math.Pi / 180))
	if zenithDeg == 90 {
		mu = 0
	}
	s := SunOf(zenithDeg, mu, zenithDeg, mu, 1361, false)
	return &s
}

func limits() *rules.Limits {
	l := rules.DefaultLimits()
	return &l
}

// TestSunMax holds the upper limits against values worked out from the formulas of Long & Dutton 2002 (V2.0, from memory) with a
// solar constant of 1361 W/m2 at 1 AU, to the printed hundredth.
func TestSunMax(t *testing.T) {
	l := limits()
	columns := []*rules.SunLimit{&l.Possible[rules.Global], &l.Rare[rules.Global], &l.Possible[rules.Diffuse], &l.Rare[rules.Diffuse],
		&l.Rare[rules.Direct], &l.Possible[rules.Reflected], &l.Rare[rules.Reflected]}
	for _, row := range [][8]float64{ // zenith, then global possible, rare, diffuse possible, rare, direct rare, reflected possible, rare
		{0, 2141.50, 1683.20, 1342.95, 1050.75, 1302.95, 1683.20, 1411.00},
		{30, 1817.85, 1424.28, 1137.97, 888.93, 1266.28, 1424.28, 1195.24},
		{60, 988.61, 760.89, 612.79, 474.31, 1135.58, 760.89, 642.41},
		{75, 503.22, 372.58, 305.37, 231.61, 996.69, 372.58, 318.82},
		{80, 349.78, 249.82, 208.19, 154.89, 920.99, 249.82, 216.52},
		{85, 209.22, 137.38, 119.17, 84.61, 803.67, 137.38, 122.81},
		{89, 115.86, 62.68, 60.04, 37.93, 585.38, 62.68, 60.57},
		{90, 100, 50, 50, 30, 10, 50, 50},
		{120, 100, 50, 50, 30, 10, 50, 50},
	} {
		s := sunAt(row[0])
		for k, limit := range columns {
			if got := SunMax(limit, s); math.Abs(got-row[k+1]) > 0.0051 {
				t.Errorf("zenith %v, column %d: %.4f, want %.2f", row[0], k, got, row[k+1])
			}
		}
		if got := SunMax(&l.Possible[rules.Direct], s); got != 1361 {
			t.Errorf("zenith %v: direct possible %v, want the extraterrestrial 1361", row[0], got)
		}
	}
	odd := rules.SunLimit{Factor: 2, Power: 0.7, Offset: 3} // a station's own power
	if got, want := SunMax(&odd, sunAt(60)), 2*1361*math.Pow(0.5, 0.7)+3; math.Abs(got-want) > 1e-9 {
		t.Errorf("power 0.7: %v, want %v", got, want)
	}
	one := rules.SunLimit{Factor: 2, Power: 1, Offset: 3}
	if got := SunMax(&one, sunAt(60)); math.Abs(got-1364) > 1e-9 {
		t.Errorf("power 1: %v, want 1364", got)
	}
}

// TestWithin: the bounds themselves pass.
func TestWithin(t *testing.T) {
	l := &rules.SunLimit{Low: -4, Factor: 1.5, Power: 1.2, Offset: 100}
	s := sunAt(60)
	most := SunMax(l, s)
	for _, c := range []struct {
		v    float64
		want rules.Outcome
	}{{-4, rules.Pass}, {math.Nextafter(-4, -5), rules.Miss}, {most, rules.Pass}, {math.Nextafter(most, 9999), rules.Miss}, {nan, rules.NoValue}} {
		if got := WithinSun(c.v, l.Low, l, s); got != c.want {
			t.Errorf("sun limit, %v: %v, want %v", c.v, got, c.want)
		}
	}
	b := rules.Band{Low: 40, High: 700}
	for v, want := range map[float64]rules.Outcome{40: rules.Pass, 39.99: rules.Miss, 700: rules.Pass, 700.01: rules.Miss} {
		if got := WithinBand(v, b); got != want {
			t.Errorf("band, %v: %v, want %v", v, got, want)
		}
	}
}

// TestLongwaveBounds holds the bounds against values worked out with the Stefan-Boltzmann constant of CODATA 2018, to the hundredth.
func TestLongwaveBounds(t *testing.T) {
	l := limits()
	for _, row := range [][5]float64{{250, 88.60, 246.50, 172.94, 324.30}, {273.15, 126.26, 340.66, 251.83, 448.08},
		{288.15, 156.37, 415.92, 315.66, 545.28}, {300, 183.72, 484.30, 374.10, 632.62}} {
		airC := row[0] - sensor.ZeroCelsiusK
		downLo, downHi := LWDownAirBounds(airC, l)
		upLo, upHi := LWUpAirBounds(airC, l)
		for k, got := range []float64{downLo, downHi, upLo, upHi} {
			if math.Abs(got-row[k+1]) > 0.0051 {
				t.Errorf("air %v K, bound %d: %.4f, want %.2f", row[0], k, got, row[k+1])
			}
		}
	}
}

func TestLongwave(t *testing.T) {
	l := limits()
	for _, c := range []struct {
		name string
		got  rules.Outcome
		want rules.Outcome
	}{
		{"down, within", LWDownAir(300, 0, l), rules.Pass},
		{"down, above", LWDownAir(341, 0, l), rules.Miss},
		{"down, below", LWDownAir(126, 0, l), rules.Miss},
		{"down, no air", LWDownAir(300, nan, l), rules.NoWeather},
		{"down, air too warm to be", LWDownAir(300, 70, l), rules.NoWeather},
		{"down, air at the bound", LWDownAir(500, 60, l), rules.Pass},
		{"down, absent", LWDownAir(nan, 0, l), rules.NoValue},
		{"up, within", LWUpAir(300, 0, l), rules.Pass},
		{"up, above", LWUpAir(449, 0, l), rules.Miss},
		{"up, below", LWUpAir(251, 0, l), rules.Miss},
		{"up, air too cold to be", LWUpAir(300, -96, l), rules.NoWeather},
		{"pair", LWPair(300, 400, l), rules.Pass},
		{"pair, down 25 above up", LWPair(425, 400, l), rules.Miss},
		{"pair, just under that", LWPair(424.9, 400, l), rules.Pass},
		{"pair, down 300 below up", LWPair(100, 400, l), rules.Miss},
		{"pair, no up", LWPair(300, nan, l), rules.NoPartner},
		{"pair, no down", LWPair(nan, 300, l), rules.NoValue},
	} {
		if c.got != c.want {
			t.Errorf("%s: %v, want %v", c.name, c.got, c.want)
		}
	}
}

// TestBetweenQuantities: the constants of Long & Dutton 2002 (from memory) at their edges. Exactly 75 degrees belongs to the low sun.
func TestBetweenQuantities(t *testing.T) {
	l := limits()
	l.ClosureFloorWm2 = 0
	floor := limits()
	hidden := sunAt(60)
	hidden.Hidden = true
	high, low := sunAt(74.99), sunAt(75)
	mu := func(s *Sun) float64 { return s.BeamMu }
	for _, c := range []struct {
		name string
		got  rules.Outcome
		want rules.Outcome
	}{
		{"closure 7.9 % high sun", Closure(1.079*300, 200/mu(high), 100, high, l), rules.Pass},
		{"closure 8.1 % high sun", Closure(1.081*300, 200/mu(high), 100, high, l), rules.Miss},
		{"closure -8.1 % high sun", Closure(0.919*300, 200/mu(high), 100, high, l), rules.Miss},
		{"closure 8.1 % at 75 degrees", Closure(1.081*300, 200/mu(low), 100, low, l), rules.Pass},
		{"closure 15.1 % at 75 degrees", Closure(1.151*300, 200/mu(low), 100, low, l), rules.Miss},
		{"closure, twilight", Closure(60, 0, 90, sunAt(92.9), l), rules.Miss},
		{"closure, 93 degrees", Closure(60, 0, 90, sunAt(93), l), rules.SunTooLow},
		{"closure, sum of 50", Closure(20, 0, 50, high, l), rules.TooSmall},
		{"closure, behind the mask", Closure(900, 500, 100, hidden, l), rules.SunHidden},
		{"closure, no direct", Closure(900, nan, 100, high, l), rules.NoPartner},
		{"closure, no diffuse", Closure(900, 500, nan, high, l), rules.NoPartner},
		{"closure, no global", Closure(nan, 500, 100, high, l), rules.NoValue},
		{"closure, 19 of 60 within the floor", Closure(79, 0, 60, high, floor), rules.Pass},
		{"closure, 21 of 60 beyond it", Closure(81, 0, 60, high, floor), rules.Miss},
		{"ratio 1.049 high sun", DiffuseRatio(200, 1.049*200, high, l), rules.Pass},
		{"ratio 1.051 high sun", DiffuseRatio(200, 1.051*200, high, l), rules.Miss},
		{"ratio 1.051 at 75 degrees", DiffuseRatio(200, 1.051*200, low, l), rules.Pass},
		{"ratio 1.101 at 75 degrees", DiffuseRatio(200, 1.101*200, low, l), rules.Miss},
		{"ratio, global of 50", DiffuseRatio(50, 90, high, l), rules.TooSmall},
		{"ratio, 93 degrees", DiffuseRatio(60, 90, sunAt(93), l), rules.SunTooLow},
		{"ratio, no global", DiffuseRatio(nan, 90, high, l), rules.NoPartner},
		{"ratio, no diffuse", DiffuseRatio(90, nan, high, l), rules.NoValue},
		{"albedo below one", Albedo(199, nan, 100/mu(high), 100, high, l), rules.Pass},
		{"albedo above one", Albedo(201, nan, 100/mu(high), 100, high, l), rules.Miss},
		{"albedo by global where direct is absent", Albedo(151, 150, nan, 400, high, l), rules.Miss},
		{"albedo, no reference", Albedo(151, nan, nan, 400, high, l), rules.NoPartner},
		{"albedo, small reference", Albedo(151, 50, nan, nan, high, l), rules.TooSmall},
		{"albedo, 93 degrees", Albedo(151, 60, nan, nan, sunAt(93), l), rules.SunTooLow},
		{"albedo, absent", Albedo(nan, 60, nan, nan, high, l), rules.NoValue},
	} {
		if c.got != c.want {
			t.Errorf("%s: %v, want %v", c.name, c.got, c.want)
		}
	}
}

func TestSignalAndSamples(t *testing.T) {
	l := limits()
	for _, c := range []struct {
		name string
		got  rules.Outcome
		want rules.Outcome
	}{
		{"45 of 60 samples", Samples(45, 60, l), rules.Pass}, // a share of 0.75
		{"44 of 60 samples", Samples(44, 60, l), rules.Miss},
		{"1 of 1", Samples(1, 1, l), rules.Pass},
		{"none", Samples(0, 60, l), rules.NoValue},
		{"more than expected", Samples(600, 60, l), rules.Pass},
		{"in range", Signal(3, -5, 25), rules.Pass},
		{"at the upper rail", Signal(25, -5, 25), rules.Miss},
		{"at the lower rail", Signal(-5, -5, 25), rules.Miss},
		{"no range stated", Signal(25, nan, nan), rules.Pass},
		{"no signal", Signal(nan, -5, 25), rules.NoValue},
		{"body like the air", BodyTemperature(15, 14, l), rules.Pass},
		{"body 20 K above", BodyTemperature(34, 14, l), rules.Pass},
		{"body 20.1 K above", BodyTemperature(34.1, 14, l), rules.Miss},
		{"body too hot to be", BodyTemperature(80.1, nan, l), rules.Miss},
		{"body too cold to be", BodyTemperature(-95.1, nan, l), rules.Miss},
		{"body without the air", BodyTemperature(40, nan, l), rules.Pass},
		{"no body", BodyTemperature(nan, 14, l), rules.NoValue},
		{"clock", Clock(true), rules.Miss}, {"clock right", Clock(false), rules.Pass},
		{"conflict", Conflict(true), rules.Miss}, {"no conflict", Conflict(false), rules.Pass},
		{"night -2", NightZero(-2, 2, sunAt(100), l), rules.Pass},
		{"night -2.1", NightZero(-2.1, 2, sunAt(100), l), rules.Miss},
		{"night 2.1", NightZero(2.1, 2, sunAt(96), l), rules.Miss},
		{"twilight", NightZero(9, 2, sunAt(95.9), l), rules.SunUp},
		{"night, absent", NightZero(nan, 2, sunAt(100), l), rules.NoValue},
	} {
		if c.got != c.want {
			t.Errorf("%s: %v, want %v", c.name, c.got, c.want)
		}
	}
	for v, want := range map[float64]bool{-6000: true, -7999: true, -5999: false, 0: false, math.Inf(1): true, math.Inf(-1): true, 9.96921e36: true, 101325: false} {
		if IsMark(v) != want {
			t.Errorf("mark %v: %v, want %v", v, !want, want)
		}
	}
	if got := NightZeroAllowance("A", rules.Global, l); got != 15 { // 10 W/m2 of class A (ISO 9060:2018, from memory) and 5
		t.Errorf("allowance of class A: %v, want 15", got)
	}
}

func TestStuck(t *testing.T) {
	l := limits()
	day, night := sunAt(60), sunAt(91)
	for _, c := range []struct {
		name  string
		count int
		value float64
		q     rules.Quantity
		sun   *Sun
		want  rules.Outcome
	}{
		{"29 minutes by day", 29, 300, rules.Global, day, rules.Pass},
		{"30 minutes by day", 30, 300, rules.Global, day, rules.Miss},
		{"719 minutes by night", 719, 300, rules.Global, night, rules.Pass},
		{"720 minutes by night", 720, 300, rules.Global, night, rules.Miss},
		{"about nothing by day", 2000, 0, rules.Direct, day, rules.TooSmall},
		{"about nothing in a polar night", 90_000, 0, rules.Global, night, rules.TooSmall},
		{"longwave has no night", 30, 300, rules.LWDown, night, rules.Miss},
		{"absent", 0, nan, rules.Global, day, rules.NoValue},
	} {
		if got := Stuck(&Run{c.value, c.count}, c.q, c.sun, l); got != c.want {
			t.Errorf("%s: %v, want %v", c.name, got, c.want)
		}
	}
	r := Run{Value: nan}
	for k, step := range []struct {
		v     float64
		count int
	}{{5, 1}, {5, 2}, {5, 3}, {6, 1}, {nan, 0}, {6, 1}, {6, 2}} {
		if r.Next(step.v); r.Count != step.count {
			t.Errorf("step %d: run of %d, want %d", k, r.Count, step.count)
		}
	}
}

func TestSpike(t *testing.T) {
	for _, c := range []struct {
		name             string
		before, v, after float64
		p0, p, p1        float64
		needPartner      bool
		want             rules.Outcome
	}{
		{"alone upwards", 100, 600, 110, 100, 105, 110, true, rules.Miss},
		{"alone downwards", 600, 100, 590, 600, 595, 590, true, rules.Miss},
		{"the partner follows", 100, 600, 110, 100, 500, 110, true, rules.Pass},
		{"the partner follows down", 600, 100, 590, 600, 200, 590, true, rules.Pass},
		{"the partner goes the other way", 100, 600, 110, 600, 100, 600, true, rules.Miss},
		{"a step is no spike", 100, 600, 600, 100, 100, 100, true, rules.Pass},
		{"as much as allowed", 100, 500, 100, 100, 100, 100, true, rules.Pass},
		{"no partner, needed", 100, 600, 110, nan, nan, nan, true, rules.NoPartner},
		{"no partner, not needed", 100, 600, 110, nan, nan, nan, false, rules.Miss},
		{"no minute before", nan, 600, 110, 1, 1, 1, true, rules.NoHistory},
		{"no minute after", 100, 600, nan, 1, 1, 1, true, rules.NoHistory},
		{"absent", 100, nan, 110, 1, 1, 1, true, rules.NoValue},
	} {
		if got := Spike(c.before, c.v, c.after, c.p0, c.p, c.p1, 400, c.needPartner); got != c.want {
			t.Errorf("%s: %v, want %v", c.name, got, c.want)
		}
	}
}

// TestFifthRoot: against the power function of qc/exact, whose error is below one unit in the last place.
func TestFifthRoot(t *testing.T) {
	worst := 0.0
	for i := range 400_000 {
		x := float64(i+1) / 400_000
		if i%3 == 0 {
			x = math.Ldexp(x, -i/20_000) // 0.2 is a little more than a fifth: below that the two part
		}
		want := exact.Pow(x, 0.2)
		worst = math.Max(worst, math.Abs(fifthRoot(x)-want)/want)
	}
	t.Logf("largest relative difference %.2g", worst)
	if worst > 9e-16 {
		t.Errorf("largest relative difference %.2g, allowed 9e-16", worst)
	}
	for _, x := range []float64{1, 1.0 / 32, 1.0 / 1024, 32} {
		if got := math.Pow(fifthRoot(x), 5); math.Abs(got/x-1) > 1e-15 {
			t.Errorf("the fifth power of the fifth root of %v is %v", x, got)
		}
	}
}

// Two class A pyranometers of 20 W/m2 each at 800: together 28.3, with the floor of 5 28.7 (recomputed from the formula).
func TestPartner(t *testing.T) {
	l := rules.DefaultLimits()
	nan := math.NaN()
	for _, c := range []struct {
		q    rules.Quantity
		a, b Reading2
		want rules.Outcome
	}{
		{rules.Global, Reading2{800, 20, 800}, Reading2{828, 20, 828}, rules.Pass},
		{rules.Global, Reading2{800, 20, 800}, Reading2{829, 20, 829}, rules.Miss},
		{rules.Global, Reading2{800, 20, 400}, Reading2{920, 20, 500}, rules.Pass}, // on a cloud's edge
		{rules.Global, Reading2{800, 20, nan}, Reading2{920, 20, nan}, rules.Miss},
		{rules.Global, Reading2{nan, nan, 1}, Reading2{920, 20, 1}, rules.NoValue},
		{rules.Global, Reading2{800, 20, 1}, Reading2{nan, nan, 1}, rules.NoPartner},
		{rules.Global, Reading2{800, 20, 1}, Reading2{800, nan, 1}, rules.NoPartner},
		{rules.UV, Reading2{30, 0, 30}, Reading2{30.2, 0, 30.2}, rules.Pass},
		{rules.UV, Reading2{30, 0, 30}, Reading2{30.3, 0, 30.3}, rules.Miss},
		{rules.PAR, Reading2{500, 0, 500}, Reading2{509, 0, 509}, rules.Pass},
	} {
		if got := Partner(c.q, &c.a, &c.b, &l); got != c.want {
			t.Errorf("%s %v %v: %v, want %v", c.q, c.a, c.b, got, c.want)
		}
	}
}
