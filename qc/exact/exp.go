package exact

import "math"

const (
	ln2Hi = 6.93147180369123816490e-01 // 0x3fe62e42fee00000: 32 bits, so that k*ln2Hi is exact
	ln2Lo = 1.90821492927058770002e-10
	log2e = 1.44269504088896338700e+00

	expOverflow  = 7.09782712893383973096e+02
	expUnderflow = -7.45133219101941108420e+02
	expTiny      = 1.0 / (1 << 28)
)

// Exp returns e**x.
//
// Method: x = k ln2 + r with |r| <= ln2/2; exp(r) from a rational function of
// degree 5 in r*r (FreeBSD e_exp.c); the result is scaled by 2**k.
// Special values: Exp(+Inf) = +Inf, Exp(-Inf) = 0, Exp(NaN) = NaN.
func Exp(x float64) float64 {
	switch {
	case x != x || x > math.MaxFloat64:
		return x
	case x < -math.MaxFloat64:
		return 0
	case x > expOverflow:
		return math.Inf(1)
	case x < expUnderflow:
		return 0
	case -expTiny < x && x < expTiny:
		return 1 + x
	}
	k := int(float64(log2e*x) + math.Copysign(0.5, x))
	hi := x - float64(float64(k)*ln2Hi)
	lo := float64(float64(k) * ln2Lo)
	return expReduced(hi, lo, k)
}

// expReduced returns e**(hi-lo) * 2**k for |hi-lo| <= ln2/2.
func expReduced(hi, lo float64, k int) float64 {
	const (
		p1 = 1.66666666666666657415e-01
		p2 = -2.77777777770155933842e-03
		p3 = 6.61375632143793436117e-05
		p4 = -1.65339022054652515390e-06
		p5 = 4.13813679705723846039e-08
	)
	r := hi - lo
	t := float64(r * r)
	p := p1 + float64(t*(p2+float64(t*(p3+float64(t*(p4+float64(t*p5)))))))
	c := r - float64(t*p)
	y := 1 - ((lo - float64(r*c)/(2-c)) - hi)
	return scale(y, k)
}

// scale returns y * 2**k for y in [0.5, 2). The bits are moved directly while the
// result stays normal; a subnormal result is rounded once by a multiplication.
func scale(y float64, k int) float64 {
	switch {
	case k > 1021:
		return math.Float64frombits(math.Float64bits(y)+uint64(k-1)<<52) * 2
	case k >= -1020:
		return math.Float64frombits(math.Float64bits(y) + uint64(k)<<52)
	default:
		return math.Float64frombits(math.Float64bits(y)+uint64(k+64)<<52) * 0x1p-64
	}
}
