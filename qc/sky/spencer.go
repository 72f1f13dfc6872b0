package sky

import (
	"math"

	"fluxwarden/qc/exact"
)

// Spencer holds the sun of a day of the year by Spencer's Fourier series: for quick looks and for comparing
// with older records. Against qc/sun it errs by up to 0.001 in the distance factor, because the calendar
// shifts by a day within the leap cycle.
type Spencer struct {
	DistanceFactor    float64 // 1/R^2
	DeclinationDeg    float64
	EquationOfTimeMin float64
}

// SpencerAt evaluates the series for a day of the year, 1..366; outside it ok is false.
// Source: Spencer 1971, Search 2, 172. Worked value: 1.035050, -23.0586, -2.9042 on day 1.
func SpencerAt(dayOfYear int) (s Spencer, ok bool) {
	if dayOfYear < 1 || dayOfYear > 366 {
		return Spencer{}, false
	}
	g := 2 * math.Pi * float64(dayOfYear-1) / 365
	s1, c1 := exact.Sincos(g)
	s2, c2 := exact.Sincos(2 * g)
	s3, c3 := exact.Sincos(3 * g)
	s.DistanceFactor = 1.000110 + float64(0.034221*c1) + float64(0.001280*s1) + float64(0.000719*c2) + float64(0.000077*s2)
	s.DeclinationDeg = float64(180 / math.Pi * (0.006918 - float64(0.399912*c1) + float64(0.070257*s1) -
		float64(0.006758*c2) + float64(0.000907*s2) - float64(0.002697*c3) + float64(0.00148*s3)))
	s.EquationOfTimeMin = float64(229.18 * (0.000075 + float64(0.001868*c1) - float64(0.032077*s1) -
		float64(0.014615*c2) - float64(0.04089*s2)))
	return s, true
}
