package fault

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// The line through points on a line is that line, however few stand off it: the median of the slopes bears 29 % of them (Sen 1968).
func TestTheilSen(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		slope := rapid.Float64Range(-0.01, 0.01).Draw(t, "slope")
		at, value := make([]float64, 28), make([]float64, 28)
		for i := range at {
			at[i], value[i] = float64(i), 1+slope*float64(i)
		}
		for range 3 {
			value[rapid.IntRange(0, 27).Draw(t, "where")] += rapid.Float64Range(-0.5, 0.5).Draw(t, "by")
		}
		got, z := theilSen(at, value)
		if math.Abs(got-slope) > 0.1*math.Abs(slope)+1e-9 {
			t.Fatalf("slope %v, want %v", got, slope)
		}
		if math.Abs(slope) > 1e-4 && (z > 0) != (slope > 0) {
			t.Fatalf("statistic %v of a slope of %v", z, slope)
		}
	})
	// Without ties S is n(n-1)/2 on a rising line and its variance n(n-1)(2n+5)/18 (Mann 1945): for n = 10, (45 - 1)/sqrt(125) = 3.935.
	at := []float64{1, 2, 3, 4, 5, 6, 7, 8, 9, 10}
	if _, z := theilSen(at, at); math.Abs(z-3.9355) > 0.0005 {
		t.Errorf("statistic %v, want 3.9355", z)
	}
	if _, z := theilSen(at[:2], at[:2]); z != 0 {
		t.Errorf("statistic %v of two points", z)
	}
}

// One jump is told from a line, and where it is.
func TestStepOrLine(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		jumpAt := rapid.IntRange(6, 22).Draw(t, "day")
		size := rapid.Float64Range(0.015, 0.05).Draw(t, "size") * float64(1-2*rapid.IntRange(0, 1).Draw(t, "down"))
		noise := uint64(rapid.Uint32().Draw(t, "noise"))
		days := func(of func(i int) float64) []KindFacts {
			out := make([]KindFacts, 28)
			for i := range out {
				noise = noise*6364136223846793005 + 1442695040888963407
				v := of(i) * (1 + 0.004*(float64(noise>>11)/(1<<53)-0.5))
				out[i] = KindFacts{Day: int64(20000 + i), Dull: Fact{Median: Number(v), N: 200}}
			}
			return out
		}
		pick := func(f *KindFacts) Fact { return f.Dull }
		got := trendOf(days(func(i int) float64 {
			if i >= jumpAt {
				return 1 + size
			}
			return 1
		}), stepBetter, pick)
		if got.stepDay != int64(20000+jumpAt) || math.Abs(got.step-size) > 0.004 {
			t.Fatalf("a jump of %v on day %d is told as %v on day %d", size, jumpAt, got.step, got.stepDay-20000)
		}
		line := trendOf(days(func(i int) float64 { return 1 + size*float64(i)/27 }), stepBetter, pick)
		if line.step != 0 || math.Abs(line.total()-size) > 0.004 || !line.sure() {
			t.Fatalf("a line of %v is told as a jump of %v, a line of %v with z %v", size, line.step, line.total(), line.z)
		}
	})
}
