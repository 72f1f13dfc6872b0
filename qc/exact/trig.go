package exact

import "math"

// Sin returns the sine of x radians. Sin(±Inf) = NaN.
func Sin(x float64) float64 {
	if !finite(x) {
		return math.NaN()
	}
	n, y0, y1 := reduce(x)
	switch n {
	case 0:
		return sinKernel(y0, y1)
	case 1:
		return cosKernel(y0, y1)
	case 2:
		return -sinKernel(y0, y1)
	}
	return -cosKernel(y0, y1)
}

// Cos returns the cosine of x radians. Cos(±Inf) = NaN.
func Cos(x float64) float64 {
	if !finite(x) {
		return math.NaN()
	}
	n, y0, y1 := reduce(x)
	switch n {
	case 0:
		return cosKernel(y0, y1)
	case 1:
		return -sinKernel(y0, y1)
	case 2:
		return -cosKernel(y0, y1)
	}
	return sinKernel(y0, y1)
}

// Sincos returns Sin(x) and Cos(x), bit for bit, for the price of little more than one.
func Sincos(x float64) (sin, cos float64) {
	if !finite(x) {
		return math.NaN(), math.NaN()
	}
	n, y0, y1 := reduce(x)
	s, c := sinKernel(y0, y1), cosKernel(y0, y1)
	switch n {
	case 0:
		return s, c
	case 1:
		return c, -s
	case 2:
		return -s, -c
	}
	return -c, s
}

// Tan returns the tangent of x radians, as a quotient: within 2 ulp. Tan(±Inf) = NaN.
func Tan(x float64) float64 {
	if x == 0 {
		return x // keeps the sign of zero
	}
	s, c := Sincos(x)
	return s / c
}

func finite(x float64) bool { return x-x == 0 }

// sinKernel returns sin(x+y) for |x| <= pi/4 and y the tail of x (FreeBSD k_sin.c).
func sinKernel(x, y float64) float64 {
	const (
		s1 = -1.66666666666666324348e-01
		s2 = 8.33333333332248946124e-03
		s3 = -1.98412698298579493134e-04
		s4 = 2.75573137070700676789e-06
		s5 = -2.50507602534068634195e-08
		s6 = 1.58969099521155010221e-10
	)
	z := float64(x * x)
	v := float64(z * x)
	r := s2 + float64(z*(s3+float64(z*(s4+float64(z*(s5+float64(z*s6)))))))
	return x - ((float64(z*(float64(0.5*y)-float64(v*r))) - y) - float64(v*s1))
}

// cosKernel returns cos(x+y) for |x| <= pi/4 and y the tail of x (FreeBSD k_cos.c).
func cosKernel(x, y float64) float64 {
	const (
		c1 = 4.16666666666666019037e-02
		c2 = -1.38888888888741095749e-03
		c3 = 2.48015872894767294178e-05
		c4 = -2.75573143513906633035e-07
		c5 = 2.08757232129817482790e-09
		c6 = -1.13596475577881948265e-11
	)
	z := float64(x * x)
	r := float64(z * (c1 + float64(z*(c2+float64(z*(c3+float64(z*(c4+float64(z*(c5+float64(z*c6)))))))))))
	halfZ := float64(0.5 * z)
	w := 1 - halfZ
	return w + (((1 - w) - halfZ) + (float64(z*r) - float64(x*y)))
}
