package export

import (
	"math"
	"testing"
)

func TestFixedDecimals(t *testing.T) {
	for _, c := range []struct {
		x        float64
		decimals int
		want     string
	}{{0, 2, "0.00"}, {1.5, 2, "1.50"}, {-0.015625, 2, "-0.02"}, {-0.001, 2, "0.00"}, {1234.0625, 3, "1234.062"}, {950.125, 1, "950.1"},
		{math.NaN(), 2, ""}, {1e300, 2, "1e+300"}, {7, 0, "7"}, {-3.05, 1, "-3.0"}} {
		if got := string(appendFixed(nil, c.x, c.decimals)); got != c.want {
			t.Errorf("%v with %d decimals: %q, want %q", c.x, c.decimals, got, c.want)
		}
	}
}
