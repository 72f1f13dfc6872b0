package sun

import "fluxwarden/qc/exact"

// The moon's apparent place to about 0.003 degrees, for eclipses: the main terms of the lunar
// theory as given by Meeus 1998, Astronomical Algorithms, chapter 47 (after ELP-2000/82),
// tables 47.A and 47.B, from memory; checked against the chapter's worked example.

// lunarTerm holds the multiples of D, M, M', F and the coefficients: sine of the longitude in
// 1e-6 degrees and cosine of the distance in metres (table 47.A), or sine of the latitude in
// 1e-6 degrees (table 47.B).
type lunarTerm struct {
	d, m, mp, f int8
	sin, cos    float64
}

var lunarLongitudeTerms = [...]lunarTerm{
	{0, 0, 1, 0, 6288774, -20905355}, {2, 0, -1, 0, 1274027, -3699111}, {2, 0, 0, 0, 658314, -2955968},
	{0, 0, 2, 0, 213618, -569925}, {0, 1, 0, 0, -185116, 48888}, {0, 0, 0, 2, -114332, -3149},
	{2, 0, -2, 0, 58793, 246158}, {2, -1, -1, 0, 57066, -152138}, {2, 0, 1, 0, 53322, -170733},
	{2, -1, 0, 0, 45758, -204586}, {0, 1, -1, 0, -40923, -129620}, {1, 0, 0, 0, -34720, 108743},
	{0, 1, 1, 0, -30383, 104755}, {2, 0, 0, -2, 15327, 10321}, {0, 0, 1, 2, -12528, 0},
	{0, 0, 1, -2, 10980, 79661}, {4, 0, -1, 0, 10675, -34782}, {0, 0, 3, 0, 10034, -23210},
	{4, 0, -2, 0, 8548, -21636}, {2, 1, -1, 0, -7888, 24208}, {2, 1, 0, 0, -6766, 30824},
	{1, 0, -1, 0, -5163, -8379}, {1, 1, 0, 0, 4987, -16675}, {2, -1, 1, 0, 4036, -12831},
	{2, 0, 2, 0, 3994, -10445}, {4, 0, 0, 0, 3861, -11650}, {2, 0, -3, 0, 3665, 14403},
	{0, 1, -2, 0, -2689, -7003}, {2, 0, -1, 2, -2602, 0}, {2, -1, -2, 0, 2390, 10056},
	{1, 0, 1, 0, -2348, 6322}, {2, -2, 0, 0, 2236, -9884}, {0, 1, 2, 0, -2120, 5751},
	{0, 2, 0, 0, -2069, 0}, {2, -2, -1, 0, 2048, -4950}, {2, 0, 1, -2, -1773, 4130},
	{2, 0, 0, 2, -1595, 0}, {4, -1, -1, 0, 1215, -3958}, {0, 0, 2, 2, -1110, 0},
	{3, 0, -1, 0, -892, 3258}, {2, 1, 1, 0, -810, 2616}, {4, -1, -2, 0, 759, -1897},
	{0, 2, -1, 0, -713, -2117}, {2, 2, -1, 0, -700, 2354}, {2, 1, -2, 0, 691, 0},
	{2, -1, 0, -2, 596, 0}, {4, 0, 1, 0, 549, -1423}, {0, 0, 4, 0, 537, -1117},
	{4, -1, 0, 0, 520, -1571}, {1, 0, -2, 0, -487, -1739}, {2, 1, 0, -2, -399, 0},
	{0, 0, 2, -2, -381, -4421}, {1, 1, 1, 0, 351, 0}, {3, 0, -2, 0, -340, 0},
	{4, 0, -3, 0, 330, 0}, {2, -1, 2, 0, 327, 0}, {0, 2, 1, 0, -323, 1165},
	{1, 1, -1, 0, 299, 0}, {2, 0, 3, 0, 294, 0}, {2, 0, -1, -2, 0, 8752},
}

// lunarLatitudeTerms leaves out the terms below 0.0004 degrees.
var lunarLatitudeTerms = [...]lunarTerm{
	{0, 0, 0, 1, 5128122, 0}, {0, 0, 1, 1, 280602, 0}, {0, 0, 1, -1, 277693, 0}, {2, 0, 0, -1, 173237, 0},
	{2, 0, -1, 1, 55413, 0}, {2, 0, -1, -1, 46271, 0}, {2, 0, 0, 1, 32573, 0}, {0, 0, 2, 1, 17198, 0},
	{2, 0, 1, -1, 9266, 0}, {0, 0, 2, -1, 8822, 0}, {2, -1, 0, -1, 8216, 0}, {2, 0, -2, -1, 4324, 0},
	{2, 0, 1, 1, 4200, 0}, {2, 1, 0, -1, -3359, 0}, {2, -1, -1, 1, 2463, 0}, {2, -1, 0, 1, 2211, 0},
	{2, -1, -1, -1, 2065, 0}, {0, 1, -1, -1, -1870, 0}, {4, 0, -1, -1, 1828, 0}, {0, 1, 0, 1, -1794, 0},
	{0, 0, 0, 3, -1749, 0}, {0, 1, -1, 1, -1565, 0}, {1, 0, 0, 1, -1491, 0}, {0, 1, 1, 1, -1475, 0},
	{0, 1, 1, -1, -1410, 0}, {0, 1, 0, -1, -1344, 0}, {1, 0, 0, -1, -1335, 0}, {0, 0, 3, 1, 1107, 0},
	{4, 0, 0, -1, 1021, 0}, {4, 0, -1, 1, 833, 0}, {0, 0, 1, -3, 777, 0}, {4, 0, -2, 1, 671, 0},
	{2, 0, 0, -3, 607, 0}, {2, 0, 2, -1, 596, 0}, {2, -1, 1, -1, 491, 0}, {2, 0, -2, 1, -451, 0},
	{0, 0, 3, -1, 439, 0}, {2, 0, 2, 1, 422, 0}, {2, 0, -3, -1, 421, 0},
}

// moonPlace is the moon's geocentric place: longitude and latitude of date without nutation, in
// degrees, and the distance of the centres in km.
type moonPlace struct{ lambdaDeg, betaDeg, distanceKm float64 }

// moonAt evaluates the theory for Julian centuries TT from J2000 (Meeus 47.1 to 47.6).
func moonAt(t float64) moonPlace {
	lp := polynomial(t, 218.3164477, 481267.88123421, -0.0015786, 1.0/538841, -1.0/65194000)
	d := polynomial(t, 297.8501921, 445267.1114034, -0.0018819, 1.0/545868, -1.0/113065000)
	m := polynomial(t, 357.5291092, 35999.0502909, -0.0001536, 1.0/24490000)
	mp := polynomial(t, 134.9633964, 477198.8675055, 0.0087414, 1.0/69699, -1.0/14712000)
	f := polynomial(t, 93.2720950, 483202.0175233, -0.0036539, -1.0/3526000, 1.0/863310000)
	eccentricity := polynomial(t, 1, -0.002516, -0.0000074)
	factor := [3]float64{1, eccentricity, float64(eccentricity * eccentricity)}
	argument := func(n *lunarTerm) (sin, cos, e float64) {
		sin, cos = sincosDeg(float64(float64(n.d)*d) + float64(float64(n.m)*m) + float64(float64(n.mp)*mp) + float64(float64(n.f)*f))
		return sin, cos, factor[max(n.m, -n.m)]
	}
	var longitude, latitude, distance float64
	for i := range lunarLongitudeTerms {
		n := &lunarLongitudeTerms[i]
		sin, cos, e := argument(n)
		longitude += float64(n.sin * e * sin)
		distance += float64(n.cos * e * cos)
	}
	for i := range lunarLatitudeTerms {
		n := &lunarLatitudeTerms[i]
		sin, _, e := argument(n)
		latitude += float64(n.sin * e * sin)
	}
	// Venus, Jupiter and the flattening of the Earth.
	a1 := 119.75 + float64(131.849*t)
	a2 := 53.09 + float64(479264.290*t)
	a3 := 313.45 + float64(481266.484*t)
	longitude += float64(3958*sinDeg(a1)) + float64(1962*sinDeg(lp-f)) + float64(318*sinDeg(a2))
	latitude += float64(-2235*sinDeg(lp)) + float64(382*sinDeg(a3)) + float64(175*sinDeg(a1-f)) +
		float64(175*sinDeg(a1+f)) + float64(127*sinDeg(lp-mp)) - float64(115*sinDeg(lp+mp))
	return moonPlace{
		lambdaDeg:  wrap360(lp + longitude/1e6),
		betaDeg:    latitude / 1e6,
		distanceKm: 385000.56 + distance/1000,
	}
}

// vector is a place in the equator's frame of date: x to the equinox, z to the pole.
type vector struct{ x, y, z float64 }

func (a vector) minus(b vector) vector { return vector{a.x - b.x, a.y - b.y, a.z - b.z} }

func (a vector) dot(b vector) float64 {
	return float64(a.x*b.x) + float64(a.y*b.y) + float64(a.z*b.z)
}

func (a vector) times(k float64) vector {
	return vector{float64(a.x * k), float64(a.y * k), float64(a.z * k)}
}

// separationRad is the angle between two vectors, precise for small ones.
func separationRad(a, b vector) float64 {
	cross := vector{
		float64(a.y*b.z) - float64(a.z*b.y),
		float64(a.z*b.x) - float64(a.x*b.z),
		float64(a.x*b.y) - float64(a.y*b.x),
	}
	return exact.Atan2(sqrt(cross.dot(cross)), a.dot(b))
}

// moonVector returns the moon's geocentric place in Earth radii, in the frame of g.
func moonVector(g *geocentric) vector {
	m := moonAt(g.jce)
	sinL, cosL := sincosDeg(m.lambdaDeg + g.dpsi)
	sinB, cosB := sincosDeg(m.betaDeg)
	sinE, cosE := sincosDeg(g.eps)
	v := vector{
		x: float64(cosB * cosL),
		y: float64(cosB*sinL*cosE) - float64(sinB*sinE),
		z: float64(cosB*sinL*sinE) + float64(sinB*cosE),
	}
	return v.times(m.distanceKm / earthRadiusKm)
}

// sunVector returns the sun's geocentric place in Earth radii.
func sunVector(g *geocentric) vector {
	sinD, cosD := sincosDeg(g.deltaDeg)
	sinA, cosA := sincosDeg(g.alpha)
	v := vector{float64(cosD * cosA), float64(cosD * sinA), sinD}
	return v.times(g.r * auKm / earthRadiusKm)
}
