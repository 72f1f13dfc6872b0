package sun

import (
	"math"

	"fluxwarden/qc/exact"
)

// Site is a place on Earth: latitude -90..90 degrees north, longitude -180..180 degrees
// east, elevation in metres above sea level.
type Site struct {
	LatitudeDeg, LongitudeDeg, ElevationM float64
}

// Position is the sun as one site sees it at one instant.
type Position struct {
	ZenithDeg         float64 // topocentric, without refraction
	ApparentZenithDeg float64 // topocentric, refracted where the sun is above the horizon
	AzimuthDeg        float64 // from north, clockwise, [0, 360)
	DistanceAU        float64 // Earth to sun, 0.983 .. 1.017
	DeclinationDeg    float64 // topocentric
	HourAngleDeg      float64 // topocentric, west positive, [-180, 180)
	EquationOfTimeMin float64 // apparent less mean solar time, -15 .. 17
}

// At returns the position of the sun at a UTC instant (microseconds since 1970).
//
// Inputs: pressureHPa and temperatureC are the site's annual or present means and enter the
// refraction only; deltaTSeconds is TT - UT1 (see DeltaTSeconds).
// Source: Reda and Andreas, Solar Position Algorithm for Solar Radiation Applications,
// NREL/TP-560-34302, revised January 2008, section 3 (eq. 4 to 47) and appendix A.1.
// Validity: years -2000 to 6000, 0.0003 degrees. Outside it degrades without notice.
// Worked value: appendix A.5 of the report, see the test.
func At(unixMicros int64, site Site, pressureHPa, temperatureC, deltaTSeconds float64) Position {
	g := geocentricAt(daysFromJ2000(unixMicros), deltaTSeconds)
	t := g.topocentric(site)
	return Position{
		ZenithDeg:         90 - t.elevationDeg,
		ApparentZenithDeg: 90 - t.elevationDeg - Refraction(t.elevationDeg, pressureHPa, temperatureC),
		AzimuthDeg:        wrap360(t.gammaDeg + 180),
		DistanceAU:        g.r,
		DeclinationDeg:    t.deltaDeg,
		HourAngleDeg:      wrap180(t.hourAngleDeg),
		EquationOfTimeMin: g.equationOfTimeMin(),
	}
}

// geocentric holds the quantities that do not depend on the site, named as in the report.
type geocentric struct {
	jc, jce, jme    float64    // Julian centuries UT and TT, millennia TT
	l, b, r         float64    // heliocentric longitude, latitude (deg), radius (AU)
	theta, beta     float64    // geocentric longitude and latitude, deg
	x               [5]float64 // arguments of nutation, deg
	dpsi, deps      float64    // nutation in longitude and obliquity, deg
	eps0            float64    // mean obliquity, arc seconds
	eps             float64    // true obliquity, deg
	dtau, lambda    float64    // aberration, apparent longitude, deg
	nu0, nu         float64    // Greenwich mean and apparent sidereal time, deg
	alpha, deltaDeg float64    // right ascension, declination, deg
}

// geocentricAt evaluates sections 3.1 to 3.10 for a time in days UT from J2000.
func geocentricAt(days, deltaTSeconds float64) geocentric {
	var g geocentric
	daysTT := days + deltaTSeconds/secondsPerDay
	g.jc = days / 36525
	g.jce = daysTT / 36525
	g.jme = g.jce / 10
	g.heliocentric()
	g.theta = wrap360(g.l + 180)
	g.beta = -g.b
	g.nutation()
	g.obliquity()
	g.dtau = -20.4898 / (3600 * g.r)
	g.lambda = g.theta + g.dpsi + g.dtau
	sinEps, cosEps := sincosDeg(g.eps)
	// 280.46061837 + 360.98564736629 d, the whole turns of d taken out before the product rounds.
	g.nu0 = wrap360(280.46061837 + float64(360*(days-math.Floor(days))) + float64(0.98564736629*days) +
		float64(g.jc*g.jc*(0.000387933-g.jc/38710000)))
	g.nu = g.nu0 + float64(g.dpsi*cosEps)
	sinLambda, cosLambda := sincosDeg(g.lambda)
	sinBeta, cosBeta := sincosDeg(g.beta)
	// eq. 30 with both arguments multiplied by cos(beta), which is positive.
	g.alpha = wrap360(atan2Deg(float64(sinLambda*cosEps*cosBeta)-float64(sinBeta*sinEps), float64(cosLambda*cosBeta)))
	g.deltaDeg = asinDeg(float64(sinBeta*cosEps) + float64(cosBeta*sinEps*sinLambda))
	return g
}

// heliocentric evaluates section 3.2, eq. 9 to 12.
func (g *geocentric) heliocentric() {
	t := g.jme
	l := polynomial(t, series(termsL0[:], t), series(termsL1[:], t), series(termsL2[:], t),
		series(termsL3[:], t), series(termsL4[:], t), series(termsL5[:], t))
	b := polynomial(t, series(termsB0[:], t), series(termsB1[:], t))
	r := polynomial(t, series(termsR0[:], t), series(termsR1[:], t), series(termsR2[:], t),
		series(termsR3[:], t), series(termsR4[:], t))
	g.l = wrap360(float64(l / 1e8 * degPerRad))
	g.b = float64(b / 1e8 * degPerRad)
	g.r = r / 1e8
}

func series(terms []periodicTerm, jme float64) float64 {
	sum := 0.0
	for i := range terms {
		sum += float64(terms[i].a * exact.Cos(terms[i].b+float64(terms[i].c*jme)))
	}
	return sum
}

// nutation evaluates section 3.4, eq. 15 to 23.
func (g *geocentric) nutation() {
	t := g.jce
	g.x = [5]float64{
		polynomial(t, 297.85036, 445267.111480, -0.0019142, 1.0/189474),
		polynomial(t, 357.52772, 35999.050340, -0.0001603, -1.0/300000),
		polynomial(t, 134.96298, 477198.867398, 0.0086972, 1.0/56250),
		polynomial(t, 93.27191, 483202.017538, -0.0036825, 1.0/327270),
		polynomial(t, 125.04452, -1934.136261, 0.0020708, 1.0/450000),
	}
	var dpsi, deps float64
	for i := range nutationTerms {
		n := &nutationTerms[i]
		arg := 0.0
		for j, y := range n.y {
			arg += float64(float64(y) * g.x[j])
		}
		sin, cos := sincosDeg(arg)
		dpsi += float64((n.a + float64(n.b*t)) * sin)
		deps += float64((n.c + float64(n.d*t)) * cos)
	}
	g.dpsi, g.deps = dpsi/36000000, deps/36000000
}

// obliquity evaluates section 3.5, eq. 24 and 25.
func (g *geocentric) obliquity() {
	g.eps0 = polynomial(g.jme/10, 84381.448, -4680.93, -1.55, 1999.25, -51.38, -249.67, -39.05, 7.12, 27.87, 5.79, 2.45)
	g.eps = g.eps0/3600 + g.deps
}

// topocentric holds what one site sees.
type topocentric struct {
	xiDeg, x, y            float64 // parallax, observer's position in Earth radii
	dalphaDeg              float64 // parallax in right ascension
	hourAngleDeg, deltaDeg float64 // H', delta'
	elevationDeg           float64 // e0, airless
	gammaDeg               float64 // azimuth from south, westward
}

// topocentric evaluates sections 3.11 to 3.15, without refraction.
func (g *geocentric) topocentric(site Site) topocentric {
	var t topocentric
	t.x, t.y = observer(site)
	sinPhi, cosPhi := sincosDeg(site.LatitudeDeg)
	t.xiDeg = 8.794 / (3600 * g.r)
	sinXi := sinDeg(t.xiDeg)
	hourAngle := g.nu + site.LongitudeDeg - g.alpha
	sinH, cosH := sincosDeg(hourAngle)
	sinDelta, cosDelta := sincosDeg(g.deltaDeg)
	denominator := cosDelta - float64(t.x*sinXi*cosH)
	t.dalphaDeg = atan2Deg(float64(-t.x*sinXi*sinH), denominator)
	t.deltaDeg = atan2Deg(float64((sinDelta-float64(t.y*sinXi))*cosDeg(t.dalphaDeg)), denominator)
	t.hourAngleDeg = hourAngle - t.dalphaDeg
	sinH, cosH = sincosDeg(t.hourAngleDeg)
	sinDelta, cosDelta = sincosDeg(t.deltaDeg)
	t.elevationDeg = asinDeg(float64(sinPhi*sinDelta) + float64(cosPhi*cosDelta*cosH))
	// eq. 44 with both arguments multiplied by cos(delta'), which is positive.
	t.gammaDeg = atan2Deg(float64(sinH*cosDelta), float64(cosH*cosDelta*sinPhi)-float64(sinDelta*cosPhi))
	return t
}

// observer returns the site's distance from Earth's axis and from the equator's plane, in
// equatorial radii (eq. 34 to 36).
func observer(site Site) (x, y float64) {
	sinPhi, cosPhi := sincosDeg(site.LatitudeDeg)
	// u = atan(0.99664719 tan phi), kept defined at the poles.
	u := exact.Atan2(float64(0.99664719*sinPhi), cosPhi)
	sinU, cosU := exact.Sincos(u)
	h := site.ElevationM / 6378140
	return cosU + float64(h*cosPhi), float64(0.99664719*sinU) + float64(h*sinPhi)
}

// equationOfTimeMin evaluates appendix A.1, eq. A1 and A2.
func (g *geocentric) equationOfTimeMin() float64 {
	e := float64(4 * wrap180(g.meanLongitudeDeg()-0.0057183-g.alpha+float64(g.dpsi*cosDeg(g.eps))))
	switch {
	case e > 20:
		return e - 1440
	case e < -20:
		return e + 1440
	}
	return e
}

func (g *geocentric) meanLongitudeDeg() float64 {
	return polynomial(g.jme, 280.4664567, 360007.6982779, 0.03032028, 1.0/49931, -1.0/15300, -1.0/2000000)
}
