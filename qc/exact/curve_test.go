package exact

import (
	"math"
	"testing"
)

// TestCurve holds the tabulated sine against the sine by the bound of its fourth derivative, which is at most 1, and a cubic, which is met
// but for rounding.
func TestCurve(t *testing.T) {
	const cells = 40
	c := NewCurve(0, 4, cells, Sin)
	bound := 3.0 / 128 * math.Pow(0.1, 4)
	cubic := func(x float64) float64 { return 1 + x*(2-x*(0.5-0.25*x)) }
	d := NewCurve(-1, 3, cells, cubic)
	for i := range 4001 {
		x := float64(i) / 1000
		at := bound
		if x < 0.1 || x > 3.9 {
			at *= 2
		}
		if e := math.Abs(c.At(x) - math.Sin(x)); !(e <= at+1e-15) {
			t.Errorf("sin %v: off by %v, allowed %v", x, e, at)
		}
		if e := math.Abs(d.At(x-1) - cubic(x-1)); !(e < 1e-13) {
			t.Errorf("cubic at %v: off by %v", x-1, e)
		}
	}
	for _, x := range []float64{-1e-9, 4.0000001, math.NaN(), math.Inf(1)} {
		if !math.IsNaN(c.At(x)) {
			t.Errorf("at %v: %v, want no value", x, c.At(x))
		}
	}
	if c.At(4) != Sin(4) || c.At(0) != 0 {
		t.Error("the ends are not met")
	}
}
