package exact

import "math"

// Log returns the natural logarithm of x.
//
// Method: x = 2**k (1+f) with sqrt(2)/2 <= 1+f < sqrt(2); log(1+f) from a
// polynomial of degree 14 in s = f/(2+f) (FreeBSD e_log.c).
// Special values: Log(+Inf) = +Inf, Log(0) = -Inf, Log(x < 0) = NaN, Log(NaN) = NaN.
func Log(x float64) float64 {
	const (
		l1 = 6.666666666666735130e-01
		l2 = 3.999999999940941908e-01
		l3 = 2.857142874366239149e-01
		l4 = 2.222219843214978396e-01
		l5 = 1.818357216161805012e-01
		l6 = 1.531383769920937332e-01
		l7 = 1.479819860511658591e-01
	)
	switch {
	case x != x || x > math.MaxFloat64:
		return x
	case x < 0:
		return math.NaN()
	case x == 0:
		return math.Inf(-1)
	}
	k := 0
	if x < 0x1p-1022 { // subnormal
		x *= 0x1p54
		k = -54
	}
	bits := math.Float64bits(x)
	k += int(bits>>52) - 1023
	m := math.Float64frombits(bits&(1<<52-1) | 1023<<52) // in [1, 2)
	if m > math.Sqrt2 {
		m *= 0.5
		k++
	}
	f := m - 1
	s := f / (2 + f)
	s2 := float64(s * s)
	s4 := float64(s2 * s2)
	t1 := float64(s2 * (l1 + float64(s4*(l3+float64(s4*(l5+float64(s4*l7)))))))
	t2 := float64(s4 * (l2 + float64(s4*(l4+float64(s4*l6)))))
	halfF2 := float64(0.5 * f * f)
	kf := float64(k)
	low := float64(s*(halfF2+(t1+t2))) + float64(kf*ln2Lo)
	return float64(kf*ln2Hi) - ((halfF2 - low) - f)
}

// Log10 returns the decimal logarithm of x, as Log(x)/ln(10): good to 2 ulp,
// and not exact at powers of ten.
func Log10(x float64) float64 { return Log(x) * (1 / math.Ln10) }
