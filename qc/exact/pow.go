package exact

import "math"

// Pow returns x**y.
//
// Method: log2(x) is formed in two doubles (about 80 bits), multiplied by y in two
// doubles, and the fractional part is raised by the same polynomial as Exp (FreeBSD
// e_pow.c, error below 0.70 ulp).
// Special values follow math.Pow, among them Pow(x, 0) = 1 and Pow(1, y) = 1 for any x
// and y, NaN for a finite x < 0 with y not an integer.
func Pow(x, y float64) float64 {
	switch {
	case y == 0 || x == 1:
		return 1
	case y == 1:
		return x
	case x != x || y != y:
		return math.NaN()
	case y == 2:
		return float64(x * x)
	case y == -1:
		return 1 / x
	case y == 0.5 && x >= 0:
		return math.Sqrt(x)
	case x > 0 && x <= math.MaxFloat64 && -powHuge < y && y < powHuge:
		return powPositive(x, y)
	}
	return powSpecial(x, y)
}

// powHuge bounds the exponents of the ordinary method. Beyond it every base but
// those within 1e-6 of one overflows or vanishes.
const powHuge = 1 << 31

// powSpecial handles zero, infinite and negative bases and huge exponents.
func powSpecial(x, y float64) float64 {
	inf := math.Inf(1)
	whole, odd := integerKind(y)
	if math.IsInf(y, 0) {
		return powInfiniteExponent(math.Abs(x), y)
	}
	switch {
	case x < 0 && !math.IsInf(x, 0) && !whole:
		return math.NaN()
	case x == 0:
		r := 0.0
		if y < 0 {
			r = inf
		}
		return signedResult(r, odd && math.Signbit(x))
	case math.IsInf(x, 0):
		r := inf
		if y < 0 {
			r = 0
		}
		return signedResult(r, odd && x < 0)
	}
	ax := math.Abs(x)
	var r float64
	switch {
	case ax == 1:
		r = 1
	case math.Abs(y) < powHuge:
		r = powPositive(ax, y)
	default:
		r = powHugeExponent(ax, y)
	}
	return signedResult(r, odd && x < 0)
}

func signedResult(r float64, negative bool) float64 {
	if negative {
		return -r
	}
	return r
}

func powInfiniteExponent(ax, y float64) float64 {
	switch {
	case ax == 1:
		return 1
	case (ax > 1) == (y > 0):
		return math.Inf(1)
	}
	return 0
}

// integerKind tells whether y is a whole number, and whether an odd one.
func integerKind(y float64) (whole, odd bool) {
	if math.IsInf(y, 0) {
		return true, false
	}
	ay := math.Abs(y)
	if ay >= 1<<53 {
		return true, false
	}
	n := int64(ay)
	if float64(n) != ay {
		return false, false
	}
	return true, n&1 == 1
}

// powHugeExponent returns x**y for |y| >= 2**31 and finite x > 0: log(x) to twice the
// usual precision from its series where x is near one, else overflow or zero.
func powHugeExponent(x, y float64) float64 {
	if (x < 1-0x1p-20 && y > 0) || (x > 1+0x1p-20 && y < 0) {
		return 0
	}
	if x < 1-0x1p-20 || x > 1+0x1p-20 {
		return math.Inf(1)
	}
	t := x - 1
	w := float64(float64(t*t) * (0.5 - float64(t*(1.0/3-float64(t*0.25)))))
	u := float64(powIvLn2High * t)
	v := float64(t*powIvLn2Low) - float64(w*log2e)
	t1 := truncateLow(u + v)
	return powScale(t1, v-(t1-u), y)
}

const (
	powIvLn2High = 1.44269502162933349609e+00
	powIvLn2Low  = 1.92596299112661746887e-08
)

// truncateLow clears the lower 32 bits, so that a product of two such numbers is exact.
func truncateLow(x float64) float64 {
	return math.Float64frombits(math.Float64bits(x) &^ 0xffffffff)
}

// powPositive returns x**y for finite x > 0, x != 1 and |y| < 2**31.
func powPositive(x, y float64) float64 {
	const (
		l1  = 5.99999999999994648725e-01
		l2  = 4.28571428578550184252e-01
		l3  = 3.33333329818377432918e-01
		l4  = 2.72728123808534006489e-01
		l5  = 2.30660745775561754067e-01
		l6  = 2.06975017800338417784e-01
		cp  = 9.61796693925975554329e-01 // 2/(3 ln2), and split:
		cpH = 9.61796700954437255859e-01
		cpL = -7.02846165095275826516e-09
		dpH = 5.84962487220764160156e-01 // log2(1.5), split
		dpL = 1.35003920212974897128e-08
	)
	n := -1023
	if x < 0x1p-1022 {
		x *= 0x1p53
		n -= 53
	}
	hx := int32(math.Float64bits(x) >> 32)
	n += int(hx >> 20)
	j := hx & 0xfffff
	ix := j | 0x3ff00000
	base, baseH, baseL, k := 1.0, 0.0, 0.0, int32(0)
	switch {
	case j <= 0x3988E: // |x| < sqrt(3/2)
	case j < 0xBB67A: // |x| < sqrt(3)
		base, baseH, baseL, k = 1.5, dpH, dpL, 1
	default:
		n++
		ix -= 0x00100000
	}
	ax := math.Float64frombits(uint64(ix)<<32 | math.Float64bits(x)&0xffffffff)

	// ss = (ax-base)/(ax+base) as sH + sL.
	u := ax - base
	v := 1 / (ax + base)
	ss := float64(u * v)
	sH := truncateLow(ss)
	tH := math.Float64frombits(uint64(((ix>>1)|0x20000000)+0x00080000+(k<<18)) << 32)
	tL := ax - (tH - base)
	sL := float64(v * ((u - float64(sH*tH)) - float64(sH*tL)))

	// log(ax) = 2 ss + 2/3 ss**3 + ..., again in two parts.
	s2 := float64(ss * ss)
	poly := l1 + float64(s2*(l2+float64(s2*(l3+float64(s2*(l4+float64(s2*(l5+float64(s2*l6)))))))))
	r := float64(float64(s2*s2)*poly) + float64(sL*(sH+ss))
	s2 = float64(sH * sH)
	tH = truncateLow(3 + s2 + r)
	tL = r - ((tH - 3) - s2)
	u = float64(sH * tH)
	v = float64(sL*tH) + float64(tL*ss)
	pH := truncateLow(u + v)
	pL := v - (pH - u)
	zH := float64(cpH * pH)
	zL := float64(cpL*pH) + float64(pL*cp) + baseL
	nf := float64(n)
	t1 := truncateLow(((zH + zL) + baseH) + nf)
	t2 := zL - (((t1 - nf) - baseH) - zH)
	return powScale(t1, t2, y)
}

// powScale returns 2**(y*(t1+t2)), t1 having its lower 32 bits clear.
func powScale(t1, t2, y float64) float64 {
	const (
		p1   = 1.66666666666666019037e-01
		p2   = -2.77777777770155933842e-03
		p3   = 6.61375632143793436117e-05
		p4   = -1.65339022054652515390e-06
		p5   = 4.13813679705723846039e-08
		lg2  = 6.93147180559945286227e-01
		lg2H = 6.93147182464599609375e-01
		lg2L = -1.90465429995776804525e-09
	)
	y1 := truncateLow(y)
	pL := float64((y-y1)*t1) + float64(y*t2)
	pH := float64(y1 * t1)
	z := pL + pH
	switch {
	case z >= 1024:
		// The last half unit below 2**1024 still rounds to a finite number.
		if z > 1024 || pL+8.0085662595372944372e-17 > z-pH {
			return math.Inf(1)
		}
	case z < -1075.5:
		return 0
	}
	n := 0
	if z > 0.5 || z < -0.5 {
		n = int(z + math.Copysign(0.5, z))
		pH -= float64(n)
	}
	t := truncateLow(pL + pH)
	u := float64(t * lg2H)
	v := float64((pL-(t-pH))*lg2) + float64(t*lg2L)
	z = u + v
	w := v - (z - u)
	t = float64(z * z)
	poly := p1 + float64(t*(p2+float64(t*(p3+float64(t*(p4+float64(t*p5)))))))
	c := z - float64(t*poly)
	r := float64(z*c)/(c-2) - (w + float64(z*w))
	return scale(1-(r-z), n)
}
