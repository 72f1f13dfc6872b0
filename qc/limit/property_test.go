package limit

import (
	"math"
	"testing"

	"fluxwarden/rules"

	"pgregory.net/rapid"
)

// every test as a function of eight numbers, so that one property can go over all of them.
var every = []struct {
	name string
	of   func(x [8]float64, s *Sun, l *rules.Limits) rules.Outcome
	own  []int // the numbers without which there is nothing to say
}{
	{"albedo", func(x [8]float64, s *Sun, l *rules.Limits) rules.Outcome { return Albedo(x[0], x[1], x[2], x[3], s, l) }, []int{0}},
	{"closure", func(x [8]float64, s *Sun, l *rules.Limits) rules.Outcome { return Closure(x[0], x[1], x[2], s, l) }, []int{0, 1, 2}},
	{"diffuse ratio", func(x [8]float64, s *Sun, l *rules.Limits) rules.Outcome { return DiffuseRatio(x[0], x[1], s, l) }, []int{0, 1}},
	{"lw down", func(x [8]float64, _ *Sun, l *rules.Limits) rules.Outcome { return LWDownAir(x[0], x[1], l) }, []int{0, 1}},
	{"lw up", func(x [8]float64, _ *Sun, l *rules.Limits) rules.Outcome { return LWUpAir(x[0], x[1], l) }, []int{0, 1}},
	{"lw pair", func(x [8]float64, _ *Sun, l *rules.Limits) rules.Outcome { return LWPair(x[0], x[1], l) }, []int{0, 1}},
	{"night zero", func(x [8]float64, s *Sun, l *rules.Limits) rules.Outcome { return NightZero(x[0], 2, s, l) }, []int{0}},
	{"signal", func(x [8]float64, _ *Sun, _ *rules.Limits) rules.Outcome { return Signal(x[0], x[1], x[2]) }, []int{0}},
	{"body", func(x [8]float64, _ *Sun, l *rules.Limits) rules.Outcome { return BodyTemperature(x[0], x[1], l) }, []int{0}},
	{"possible", func(x [8]float64, s *Sun, l *rules.Limits) rules.Outcome {
		return WithinSun(x[0], -4, &l.Possible[rules.Global], s)
	}, []int{0}},
	{"rare", func(x [8]float64, s *Sun, l *rules.Limits) rules.Outcome {
		return WithinSun(x[0], -2, &l.Rare[rules.Direct], s)
	}, []int{0}},
	{"band", func(x [8]float64, _ *Sun, l *rules.Limits) rules.Outcome { return WithinBand(x[0], l.RareLW[0]) }, []int{0}},
	{"spike", func(x [8]float64, _ *Sun, l *rules.Limits) rules.Outcome {
		return Spike(x[0], x[1], x[2], x[3], x[4], x[5], l.SpikeWm2, true)
	}, []int{0, 1, 2}},
	{"stuck", func(x [8]float64, s *Sun, l *rules.Limits) rules.Outcome {
		return Stuck(&Run{x[0], 40}, rules.Global, s, l)
	}, []int{0}},
}

func drawn(t *rapid.T) (x [8]float64, s *Sun) {
	for i := range x {
		x[i] = rapid.OneOf(rapid.Float64Range(-50, 1500), rapid.Just(0.0), rapid.Just(-4.0)).Draw(t, "x")
	}
	s = sunAt(rapid.OneOf(rapid.Float64Range(0, 180), rapid.SampledFrom([]float64{75, 85, 90, 93, 96})).Draw(t, "zenith"))
	s.Hidden = rapid.Bool().Draw(t, "hidden")
	return x, s
}

// TestClosedOutcomes: for finite numbers the outcome is one of the list; a number that a test cannot do without makes it not
// applicable when it is absent; and no other absent one makes it run.
func TestClosedOutcomes(t *testing.T) {
	l := limits()
	rapid.Check(t, func(t *rapid.T) {
		x, s := drawn(t)
		for _, test := range every {
			if o := test.of(x, s, l); o == rules.NotRun || o >= rules.OutcomeCount {
				t.Fatalf("%s: outcome %v", test.name, o)
			}
			for _, i := range test.own {
				y := x
				y[i] = nan
				if o := test.of(y, s, l); o.Applied() {
					t.Fatalf("%s: %v although number %d of %v is absent", test.name, o, i, y)
				}
			}
			var none [8]float64
			for i := range none {
				none[i] = nan
			}
			if o := test.of(none, s, l); o.Applied() || o == rules.NotRun {
				t.Fatalf("%s: %v of nothing", test.name, o)
			}
		}
	})
}

// TestMonotone: a wider limit never turns a pass into a miss, and a value nearer to its bounds' middle never misses where one further
// out passes.
func TestMonotone(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x, s := drawn(t)
		narrow, wide := limits(), limits()
		more := rapid.Float64Range(1, 3).Draw(t, "wider by")
		wide.ClosureHigh *= more
		wide.ClosureLow *= more
		wide.ClosureFloorWm2 *= more
		wide.DiffuseRatioHigh *= more
		wide.DiffuseRatioLow *= more
		wide.AlbedoOffsetWm2 += more
		wide.LWAirDownFactor /= more
		wide.LWAirDownAboveWm2 *= more
		wide.LWAirUpAboveK *= more
		wide.LWAirUpBelowK *= more
		wide.LWPairAboveWm2 *= more
		wide.LWPairBelowWm2 *= more
		wide.BodyFromAirK *= more
		wide.SpikeWm2 *= more
		wide.StuckMinutes *= more
		wide.StuckNightMinutes *= more
		for q := range wide.Possible {
			wide.Possible[q].Offset *= more
			wide.Rare[q].Factor *= more
		}
		wide.RareLW[0].High *= more
		for _, test := range every {
			if test.of(x, s, narrow) == rules.Pass && test.of(x, s, wide) == rules.Miss {
				t.Fatalf("%s: %v passes, and misses the wider limit", test.name, x)
			}
		}
		v, w := x[0], x[1]
		if math.Abs(v-100) > math.Abs(w-100) {
			v, w = w, v // v is nearer 100, which every one of these allows at any sun
		}
		allowed := &rules.SunLimit{Factor: 1.5, Power: 1.2, Offset: 100}
		if (v-100)*(w-100) >= 0 && WithinSun(w, -4, allowed, s) == rules.Pass && WithinSun(v, -4, allowed, s) != rules.Pass {
			t.Fatalf("%v passes at %v degrees and %v does not", w, s.ZenithDeg, v)
		}
	})
}

// TestLimitFallsWithTheSun: the lower the sun, the lower the limit; at night the offset remains.
func TestLimitFallsWithTheSun(t *testing.T) {
	l := limits()
	rapid.Check(t, func(t *rapid.T) {
		a, b := rapid.Float64Range(0, 180).Draw(t, "a"), rapid.Float64Range(0, 180).Draw(t, "b")
		if a > b {
			a, b = b, a
		}
		for q := range l.Possible {
			for _, limit := range []*rules.SunLimit{&l.Possible[q], &l.Rare[q]} {
				high, low := SunMax(limit, sunAt(a)), SunMax(limit, sunAt(b))
				if low > high || limit.Power > 0 && b > 90 && low != limit.Offset {
					t.Fatalf("%v: %v at %v degrees, %v at %v", rules.Quantity(q), high, a, low, b)
				}
			}
		}
	})
}
