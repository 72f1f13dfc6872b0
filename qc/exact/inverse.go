package exact

import "math"

const (
	piO2Hi = 1.57079632679489655800e+00
	piO2Lo = 6.12323399573676603587e-17
	piO4Hi = 7.85398163397448278999e-01
	piLo   = 1.22464679914735317722e-16 // pi - float64(pi)
)

var (
	atanHi = [...]float64{4.63647609000806093515e-01, 7.85398163397448278999e-01, 9.82793723247329054082e-01, 1.57079632679489655800e+00}
	atanLo = [...]float64{2.26987774529616870924e-17, 3.06161699786838301793e-17, 1.39033110312309984516e-17, 6.12323399573676603587e-17}
)

// Atan returns the arc tangent of x in radians, in [-pi/2, pi/2].
//
// Method: x is brought to |x| < 7/16 with the arc tangents of 1/2, 1, 3/2 and
// infinity, then a polynomial of degree 22 (FreeBSD s_atan.c).
func Atan(x float64) float64 {
	const (
		a0  = 3.33333333333329318027e-01
		a1  = -1.99999999998764832476e-01
		a2  = 1.42857142725034663711e-01
		a3  = -1.11111104054623557880e-01
		a4  = 9.09088713343650656196e-02
		a5  = -7.69187620504482999495e-02
		a6  = 6.66107313738753120669e-02
		a7  = -5.83357013379057348645e-02
		a8  = 4.97687799461593236017e-02
		a9  = -3.65315727442169155270e-02
		a10 = 1.62858201153657823623e-02
	)
	ax := math.Abs(x)
	id := -1
	t := x
	switch {
	case x != x:
		return x
	case ax >= 0x1p66:
		return math.Copysign(piO2Hi+piO2Lo, x)
	case ax < 0.4375:
		if ax < 0x1p-27 {
			return x
		}
	case ax < 0.6875:
		id, t = 0, (float64(2*ax)-1)/(2+ax)
	case ax < 1.1875:
		id, t = 1, (ax-1)/(ax+1)
	case ax < 2.4375:
		id, t = 2, (ax-1.5)/(1+float64(1.5*ax))
	default:
		id, t = 3, -1/ax
	}
	z := float64(t * t)
	w := float64(z * z)
	s1 := float64(z * (a0 + float64(w*(a2+float64(w*(a4+float64(w*(a6+float64(w*(a8+float64(w*a10)))))))))))
	s2 := float64(w * (a1 + float64(w*(a3+float64(w*(a5+float64(w*(a7+float64(w*a9)))))))))
	if id < 0 {
		return t - float64(t*(s1+s2))
	}
	r := atanHi[id] - ((float64(t*(s1+s2)) - atanLo[id]) - t)
	return math.Copysign(r, x)
}

// Atan2 returns the angle of the point (x, y) in radians, in (-pi, pi], with the
// quadrant taken from both signs (FreeBSD e_atan2.c). Special values follow math.Atan2.
func Atan2(y, x float64) float64 {
	switch {
	case x != x || y != y:
		return math.NaN()
	case y == 0:
		if x > 0 || (x == 0 && !math.Signbit(x)) {
			return y
		}
		return math.Copysign(math.Pi, y)
	case x == 0:
		return math.Copysign(piO2Hi, y)
	case math.IsInf(x, 0) || math.IsInf(y, 0):
		return atan2Infinite(y, x)
	}
	q := math.Abs(y / x)
	z := piO2Hi
	if q < 0x1p60 {
		z = Atan(q)
	}
	if x > 0 {
		return math.Copysign(z, y)
	}
	return math.Copysign(math.Pi-(z-piLo), y)
}

func atan2Infinite(y, x float64) float64 {
	r := 0.0
	switch {
	case math.IsInf(x, 1) && math.IsInf(y, 0):
		r = math.Pi / 4
	case math.IsInf(x, -1) && math.IsInf(y, 0):
		r = 3 * math.Pi / 4
	case math.IsInf(x, -1):
		r = math.Pi
	case math.IsInf(y, 0):
		r = math.Pi / 2
	}
	return math.Copysign(r, y)
}

// asinRatio is the rational approximation of (asin(x)-x)/x**3 times t = x**2.
func asinRatio(t float64) float64 {
	const (
		p0 = 1.66666666666666657415e-01
		p1 = -3.25565818622400915405e-01
		p2 = 2.01212532134862925881e-01
		p3 = -4.00555345006794114027e-02
		p4 = 7.91534994289814532176e-04
		p5 = 3.47933107596021167570e-05
		q1 = -2.40339491173441421878e+00
		q2 = 2.02094576023350569471e+00
		q3 = -6.88283971605453293030e-01
		q4 = 7.70381505559019352791e-02
	)
	p := float64(t * (p0 + float64(t*(p1+float64(t*(p2+float64(t*(p3+float64(t*(p4+float64(t*p5)))))))))))
	q := 1 + float64(t*(q1+float64(t*(q2+float64(t*(q3+float64(t*q4)))))))
	return p / q
}

// Asin returns the arc sine of x in radians, in [-pi/2, pi/2]; NaN for |x| > 1
// (FreeBSD e_asin.c).
func Asin(x float64) float64 {
	ax := math.Abs(x)
	switch {
	case !(ax <= 1):
		return math.NaN()
	case ax == 1:
		return math.Copysign(piO2Hi, x)
	case ax < 0x1p-27:
		return x
	case ax < 0.5:
		return x + float64(x*asinRatio(float64(x*x)))
	}
	t := float64((1 - ax) * 0.5)
	r := asinRatio(t)
	s := math.Sqrt(t)
	if ax >= 0.975 {
		return math.Copysign(piO2Hi-(float64(2*(s+float64(s*r)))-piO2Lo), x)
	}
	w := truncateLow(s)
	c := (t - float64(w*w)) / (s + w)
	p := float64(2*s*r) - (piO2Lo - float64(2*c))
	q := piO4Hi - float64(2*w)
	return math.Copysign(piO4Hi-(p-q), x)
}

// Acos returns the arc cosine of x in radians, in [0, pi]; NaN for |x| > 1
// (FreeBSD e_acos.c).
func Acos(x float64) float64 {
	ax := math.Abs(x)
	switch {
	case !(ax <= 1):
		return math.NaN()
	case x == 1:
		return 0
	case x == -1:
		return math.Pi
	case ax < 0x1p-57:
		return piO2Hi
	case ax < 0.5:
		return piO2Hi - (x - (piO2Lo - float64(x*asinRatio(float64(x*x)))))
	case x < 0:
		z := float64((1 + x) * 0.5)
		s := math.Sqrt(z)
		w := float64(asinRatio(z)*s) - piO2Lo
		return math.Pi - float64(2*(s+w))
	}
	z := float64((1 - x) * 0.5)
	s := math.Sqrt(z)
	df := truncateLow(s)
	c := (z - float64(df*df)) / (s + df)
	w := float64(asinRatio(z)*s) + c
	return 2 * (df + w)
}
