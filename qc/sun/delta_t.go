package sun

import "math"

// deltaTTable holds TT - UT1 in seconds at the beginning of each year from 1972, as published in the
// Astronomical Almanac (table "reduction of time scales") and by the IERS as
// 32.184 + (TAI-UTC) - (UT1-UTC). From memory; good to 0.05 s.
var deltaTTable = [...]float64{
	42.23, 43.37, 44.48, 45.48, 46.46, 47.52, 48.53, 49.59, 50.54, 51.38, // 1972
	52.17, 52.96, 53.79, 54.34, 54.87, 55.32, 55.82, 56.30, 56.86, 57.57, // 1982
	58.31, 59.12, 59.98, 60.78, 61.63, 62.29, 62.97, 63.47, 63.83, 64.09, // 1992
	64.30, 64.47, 64.57, 64.69, 64.85, 65.15, 65.46, 65.78, 66.07, 66.32, // 2002
	66.60, 66.91, 67.28, 67.64, 68.10, deltaTSince2017, // 2012
}

const (
	deltaTFirstYear = 1972
	// deltaTSince2017 is 32.184 + 37 s: no leap second has been inserted since 2017-01-01 and
	// UT1-UTC has stayed within 0.4 s.
	deltaTSince2017 = 69.184
)

// DeltaTSeconds returns TT - UT1 in seconds for a decimal year.
//
// From 1972 to 2017 the table is interpolated, after it the value stands: the published
// forecasts run 6 s high by 2026 (Earth's rotation sped up), and 6 s are 0.00007
// degrees. Before 1972 the polynomials of Espenak and Meeus 2006 (NASA/TP-2006-214141)
// hold, before 1900 their long-term parabola -20 + 32 ((year-1820)/100)**2.
// A NaN year gives NaN.
func DeltaTSeconds(year float64) float64 {
	switch {
	case year >= 2017:
		return deltaTSince2017
	case year >= deltaTFirstYear:
		i := int(year) - deltaTFirstYear
		f := year - math.Floor(year)
		return deltaTTable[i] + float64(f*(deltaTTable[i+1]-deltaTTable[i]))
	case year >= 1961:
		t := year - 1975
		return polynomial(t, 45.45, 1.067, -1.0/260, -1.0/718)
	case year >= 1941:
		t := year - 1950
		return polynomial(t, 29.07, 0.407, -1.0/233, 1.0/2547)
	case year >= 1920:
		t := year - 1920
		return polynomial(t, 21.20, 0.84493, -0.076100, 0.0020936)
	case year >= 1900:
		t := year - 1900
		return polynomial(t, -2.79, 1.494119, -0.0598939, 0.0061966, -0.000197)
	}
	u := (year - 1820) / 100
	return -20 + float64(32*u*u)
}

// polynomial returns c[0] + c[1] x + c[2] x**2 + ... by Horner's rule.
func polynomial(x float64, c ...float64) float64 {
	sum := 0.0
	for i := len(c) - 1; i >= 0; i-- {
		sum = float64(sum*x) + c[i]
	}
	return sum
}
