package sun

import (
	"math"

	"fluxwarden/qc/exact"
)

const (
	degPerRad = 180 / math.Pi
	radPerDeg = math.Pi / 180
)

func sinDeg(deg float64) float64 { return exact.Sin(float64(deg * radPerDeg)) }
func cosDeg(deg float64) float64 { return exact.Cos(float64(deg * radPerDeg)) }
func tanDeg(deg float64) float64 { return exact.Tan(float64(deg * radPerDeg)) }

func sincosDeg(deg float64) (sin, cos float64) { return exact.Sincos(float64(deg * radPerDeg)) }

func atan2Deg(y, x float64) float64 { return float64(exact.Atan2(y, x) * degPerRad) }

// asinDeg returns the arc sine in degrees; a rounding error beyond ±1 is taken as ±1.
func asinDeg(x float64) float64 {
	return float64(exact.Asin(math.Max(-1, math.Min(1, x))) * degPerRad)
}

// wrap360 brings an angle into [0, 360).
func wrap360(deg float64) float64 {
	w := deg - float64(360*math.Floor(deg/360))
	if w >= 360 { // a tiny negative angle rounds up to the full circle
		return 0
	}
	return w
}

// wrap180 brings an angle into [-180, 180).
func wrap180(deg float64) float64 { return wrap360(deg+180) - 180 }

func sqrt(x float64) float64 { return math.Sqrt(x) }
