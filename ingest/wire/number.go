package wire

import (
	"math"
	"strconv"
)

// powersOfTen are those that a float64 holds exactly.
var powersOfTen = [...]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15,
	1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

const digitsExact = 15 // decimal digits that every float64 holds exactly

// scanNumber reads a JSON number (RFC 8259 section 6) at b[i] and gives the index behind it. syntax is false where there
// is no such number; finite is false where it is one that a float64 cannot hold. A negative zero becomes zero: the two are
// equal, and a row must not depend on which of them came first.
//
// Up to 15 digits with a power of ten within 1e22, both operands are exact, so that one multiplication or division
// rounds correctly (Clinger 1990, "How to read floating point numbers accurately"). Everything else goes to strconv.
func scanNumber(b []byte, i int, plusAndBareDot bool) (v float64, end int, syntax, finite bool) {
	start := i
	negative := false
	if i < len(b) && (b[i] == '-' || (plusAndBareDot && b[i] == '+')) {
		negative = b[i] == '-'
		i++
	}
	var mantissa uint64
	first := i
	for i < len(b) && b[i]-'0' <= 9 {
		mantissa = mantissa*10 + uint64(b[i]-'0')
		i++
	}
	digits := i - first
	if !plusAndBareDot && (digits == 0 || (digits > 1 && b[first] == '0')) {
		return 0, start, false, false
	}
	exp10 := 0
	if i < len(b) && b[i] == '.' {
		i++
		point := i
		for i < len(b) && b[i]-'0' <= 9 {
			mantissa = mantissa*10 + uint64(b[i]-'0')
			i++
		}
		exp10 = point - i
		digits -= exp10
		if i == point && (!plusAndBareDot || digits == 0) {
			return 0, start, false, false
		}
	}
	if digits == 0 {
		return 0, start, false, false
	}
	if i < len(b) && (b[i] == 'e' || b[i] == 'E') {
		e, next, ok := scanExponent(b, i+1)
		if !ok {
			return 0, start, false, false
		}
		exp10, i = exp10+e, next
	}
	if digits <= digitsExact && exp10 >= -22 && exp10 <= 22 {
		v = float64(mantissa)
		if exp10 < 0 {
			v /= powersOfTen[-exp10]
		} else {
			v *= powersOfTen[exp10]
		}
		if negative && v != 0 {
			v = -v
		}
		return v, i, true, true
	}
	v, err := strconv.ParseFloat(string(b[start:i]), 64)
	if err != nil || math.IsInf(v, 0) {
		return 0, i, true, false
	}
	return v + 0, i, true, true
}

// exponentMax bounds the exponent while it is read; anything beyond is zero or infinite, and strconv says which.
const exponentMax = 1 << 20

func scanExponent(b []byte, i int) (e, end int, ok bool) {
	negative := false
	if i < len(b) && (b[i] == '+' || b[i] == '-') {
		negative = b[i] == '-'
		i++
	}
	first := i
	for i < len(b) && b[i]-'0' <= 9 {
		if e < exponentMax {
			e = e*10 + int(b[i]-'0')
		}
		i++
	}
	if negative {
		e = -e
	}
	return e, i, i > first
}
