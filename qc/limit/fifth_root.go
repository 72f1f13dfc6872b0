package limit

import "math"

// fifthRoot is x^0.2 for a positive, normal x, within four units in the last place: powers of two are taken out, a polynomial gives the
// rest within 1e-6, and one step of Halley's iteration for y^5 = x triples the digits. The limits ask for it each minute, and exact.Pow
// takes three times as long.
func fifthRoot(x float64) float64 {
	const bias, mantissa = 1023, 1<<52 - 1
	bits := math.Float64bits(x)
	e := int(bits>>52) - bias
	m := math.Float64frombits(bits&mantissa | bias<<52) // 1 to 2
	q := (e + 5*bias) / 5
	y := 0.657532159 + float64(m*(0.575366772+float64(m*(-0.353711702+float64(m*(0.155399329+float64(m*(-0.038675490+float64(m*0.004090422)))))))))
	y5 := float64(float64(float64(y*y)*float64(y*y)) * y)
	y = float64(y*(float64(2*y5)+float64(3*m))) / (float64(3*y5) + float64(2*m))
	return y * rootsOfTwo[e+5*bias-5*q] * math.Float64frombits(uint64(q)<<52)
}

// rootsOfTwo are 2^(r/5).
var rootsOfTwo = [5]float64{1, 1.148698354997035, 1.3195079107728942, 1.5157165665103982, 1.7411011265922482}
