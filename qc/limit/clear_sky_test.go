package limit

import (
	"math"
	"testing"

	"fluxwarden/rules"

	"pgregory.net/rapid"
)

// TestRayleigh: at a cosine of 0.5 and 1000 hPa the molecules scatter 44.07 W/m2 (Long & Shi 2008, value recomputed); the class's offset is
// allowed beside 1 W/m2.
func TestRayleigh(t *testing.T) {
	l := rules.DefaultLimits()
	s := SunOf(60, 0.5, 60, 0.5, 1361, false)
	low := SunOf(89, 0.017, 89, 0.017, 1361, false)
	hidden := s
	hidden.Hidden = true
	for _, c := range []struct {
		name      string
		b, d      float64
		allowance float64
		eclipsed  bool
		sun       *Sun
		want      rules.Outcome
	}{
		{"clean sky", 900, 60, 0, false, &s, rules.Pass},
		{"just above", 900, 43.2, 0, false, &s, rules.Pass},
		{"just below", 900, 42.9, 0, false, &s, rules.Miss},
		{"within the class's offset", 900, 38, 10, false, &s, rules.Pass},
		{"beyond the class's offset", 900, 32, 10, false, &s, rules.Miss},
		{"overcast", 5, 30, 0, false, &s, rules.TooSmall},
		{"dim", 10, 20, 0, false, &s, rules.TooSmall},
		{"eclipse", 200, 20, 0, true, &s, rules.EclipseNow},
		{"low sun", 300, 20, 0, false, &low, rules.SunTooLow},
		{"hidden sun", 300, 20, 0, false, &hidden, rules.SunHidden},
		{"no direct", math.NaN(), 20, 0, false, &s, rules.NoPartner},
		{"no diffuse", 900, math.NaN(), 0, false, &s, rules.NoValue},
	} {
		if got := Rayleigh(c.b, c.d, 1000, c.allowance, c.eclipsed, c.sun, &l); got != c.want {
			t.Errorf("%s: %s, want %s", c.name, got, c.want)
		}
	}
}

func TestClearDirect(t *testing.T) {
	l := rules.DefaultLimits()
	s, low := SunOf(60, 0.5, 60, 0.5, 1361, false), SunOf(86, 0.07, 86, 0.07, 1361, false)
	for _, c := range []struct {
		b                float64
		learnt, eclipsed bool
		sun              *Sun
		want             rules.Outcome
	}{
		{870, true, false, &s, rules.Pass}, {871, true, false, &s, rules.Miss}, {100, true, false, &s, rules.Pass}, // smoke and cloud only take
		{2000, false, false, &s, rules.NotLearnt}, {2000, true, true, &s, rules.EclipseNow}, {2000, true, false, &low, rules.SunTooLow},
		{math.NaN(), true, false, &s, rules.NoValue},
	} {
		if got := ClearDirect(c.b, 800, c.learnt, c.eclipsed, c.sun, &l); got != c.want {
			t.Errorf("%v: %s, want %s", c.b, got, c.want)
		}
	}
}

// TestClearGlobalNeedsTime: whatever the values, it misses only where the last twenty were all far above, and at once after any other it passes.
func TestClearGlobalNeedsTime(t *testing.T) {
	l := rules.DefaultLimits()
	s := SunOf(60, 0.5, 60, 0.5, 1361, false)
	rapid.Check(t, func(t *rapid.T) {
		values := rapid.SliceOfN(rapid.Float64Range(0, 1300), 1, 200).Draw(t, "values")
		bright := rapid.Float64Range(0, 700).Draw(t, "lift")
		run, above := 0, 0
		for i, v := range values {
			v += bright
			got := ClearGlobal(v, 500, &run, true, false, &s, &l)
			if v > 1.3*500+30 {
				above++
			} else {
				above = 0
			}
			if want := above >= 20; (got == rules.Miss) != want {
				t.Fatalf("minute %d: %s after %d bright minutes", i, got, above)
			}
		}
	})
}

func TestClearLongwave(t *testing.T) {
	l := rules.DefaultLimits()
	const air = 15 // 390.92 W/m2 of a black body
	for _, c := range []struct {
		v, clear, air float64
		learnt        bool
		want          rules.Outcome
	}{
		{300, 300, air, true, rules.Pass}, {390, 300, air, true, rules.Pass}, {420.5, 300, air, true, rules.Pass}, {421.5, 300, air, true, rules.Miss},
		{224, 300, air, true, rules.Miss}, {226, 300, air, true, rules.Pass}, {100, 300, air, false, rules.NotLearnt},
		{100, math.NaN(), air, true, rules.NoWeather}, {100, 300, math.NaN(), true, rules.NoWeather}, {math.NaN(), 300, air, true, rules.NoValue},
	} {
		if got := ClearLongwave(c.v, c.clear, c.air, c.learnt, &l); got != c.want {
			t.Errorf("%v of %v: %s, want %s", c.v, c.clear, got, c.want)
		}
	}
}
