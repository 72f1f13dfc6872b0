package exact

import (
	"math"
	"math/bits"
)

const (
	invPiO2 = 6.36619772367581382433e-01
	piO2A   = 1.57079632673412561417e+00 // first 33 bits of pi/2
	piO2At  = 6.07710050650619224932e-11 // pi/2 - piO2A
	piO2B   = 6.07710050630396597660e-11 // second 33 bits
	piO2Bt  = 2.02226624879595063154e-21
	piO2C   = 2.02226624871116645580e-21 // third 33 bits
	piO2Ct  = 8.47842766036889956997e-32

	// reduceMax is where n*piO2A is no longer exact (n has more than 20 bits).
	reduceMax = 1.6e6
)

// reduce writes x = n*pi/2 + (y0 + y1) with |y0| <= pi/4 and returns n modulo 4. x is
// finite. Below reduceMax it follows Cody and Waite in one to three steps (FreeBSD
// e_rem_pio2.c), above it Payne and Hanek.
func reduce(x float64) (n int, y0, y1 float64) {
	if x > -math.Pi/4 && x < math.Pi/4 {
		return 0, x, 0
	}
	if x > reduceMax || x < -reduceMax {
		return reduceHuge(x)
	}
	n = int(float64(x*invPiO2) + math.Copysign(0.5, x))
	fn := float64(n)
	r := x - float64(fn*piO2A)
	w := float64(fn * piO2At)
	y0 = r - w
	// Near a multiple of pi/2 bits cancel: take in more bits of pi.
	exponent := int(math.Float64bits(x) >> 52 & 0x7ff)
	if exponent-int(math.Float64bits(y0)>>52&0x7ff) > 16 {
		t := r
		w = float64(fn * piO2B)
		r = t - w
		w = float64(fn*piO2Bt) - ((t - r) - w)
		y0 = r - w
		if exponent-int(math.Float64bits(y0)>>52&0x7ff) > 49 {
			t = r
			w = float64(fn * piO2C)
			r = t - w
			w = float64(fn*piO2Ct) - ((t - r) - w)
			y0 = r - w
		}
	}
	return n & 3, y0, (r - y0) - w
}

// reduceHuge is Payne and Hanek's reduction for |x| > reduceMax: the fraction of
// x*4/pi from the three 64-bit digits of 4/pi that matter.
func reduceHuge(x float64) (n int, y0, y1 float64) {
	const shift, bias = 52, 1023
	negative := x < 0
	ix := math.Float64bits(math.Abs(x))
	exp := int(ix>>shift&0x7ff) - bias - shift
	ix &^= 0x7ff << shift
	ix |= 1 << shift
	digit, bitshift := uint(exp+61)/64, uint(exp+61)%64
	z0 := (fourOverPi[digit] << bitshift) | (fourOverPi[digit+1] >> (64 - bitshift))
	z1 := (fourOverPi[digit+1] << bitshift) | (fourOverPi[digit+2] >> (64 - bitshift))
	z2 := (fourOverPi[digit+2] << bitshift) | (fourOverPi[digit+3] >> (64 - bitshift))
	z2hi, _ := bits.Mul64(z2, ix)
	z1hi, z1lo := bits.Mul64(z1, ix)
	z0lo := z0 * ix
	lo, c := bits.Add64(z1lo, z2hi, 0)
	hi, _ := bits.Add64(z0lo, z1hi, c)
	octant := hi >> 61
	hi = hi<<3 | lo>>61
	lz := uint(bits.LeadingZeros64(hi))
	e := uint64(bias - (lz + 1))
	hi = (hi << (lz + 1)) | (lo >> (64 - (lz + 1)))
	hi >>= 64 - shift
	hi |= e << shift
	z := math.Float64frombits(hi)
	if octant&1 == 1 {
		octant++
		z--
	}
	n = int(octant>>1) & 3
	y0 = float64(z * (math.Pi / 4))
	if negative {
		return -n & 3, -y0, 0
	}
	return n, y0, 0
}

// fourOverPi holds the binary digits of 4/pi: sum of fourOverPi[i] * 2**(-64 i).
var fourOverPi = [...]uint64{
	0x0000000000000001, 0x45f306dc9c882a53, 0xf84eafa3ea69bb81, 0xb6c52b3278872083,
	0xfca2c757bd778ac3, 0x6e48dc74849ba5c0, 0x0c925dd413a32439, 0xfc3bd63962534e7d,
	0xd1046bea5d768909, 0xd338e04d68befc82, 0x7323ac7306a673e9, 0x3908bf177bf25076,
	0x3ff12fffbc0b301f, 0xde5e2316b414da3e, 0xda6cfd9e4f96136e, 0x9e8c7ecd3cbfd45a,
	0xea4f758fd7cbe2f6, 0x7a0e73ef14a525d4, 0xd7f6bf623f1aba10, 0xac06608df8f6d757,
}
