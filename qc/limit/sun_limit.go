// Package limit holds the tests of one minute, one file a test. Each says pass, miss, or not applicable with the reason. All are
// pure functions of numbers; NaN stands for a value that is not there.
package limit

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/rules"
)

// A Sun is what the limits need to know of the sun in one minute.
type Sun struct {
	ZenithDeg         float64 // airless, 0..180
	Mu0               float64 // its cosine, 0 once the sun is below the horizon
	Mu0Pow02          float64 // Mu0^0.2
	Mu0Pow12          float64 // Mu0^1.2
	ApparentZenithDeg float64 // with refraction
	BeamMu            float64 // cosine of the apparent zenith, 0 once the apparent sun is below the horizon: where the beam meets a plane
	SaWm2             float64 // extraterrestrial irradiance normal to the beam: solar constant over distance squared
	Hidden            bool    // behind the horizon mask
}

// SunOf works out the powers that the limits share. CosZenith is of the airless sun, beamMu of the apparent one.
func SunOf(zenithDeg, cosZenith, apparentZenithDeg, beamMu, saWm2 float64, hidden bool) Sun {
	s := Sun{ZenithDeg: zenithDeg, ApparentZenithDeg: apparentZenithDeg, SaWm2: saWm2, Hidden: hidden}
	if cosZenith > 0 {
		s.Mu0 = cosZenith
		s.Mu0Pow02 = fifthRoot(cosZenith)
		s.Mu0Pow12 = cosZenith * s.Mu0Pow02
	}
	if beamMu > 0 {
		s.BeamMu = beamMu
	}
	return s
}

// SunMax is the upper bound of a limit that follows the sun.
//
//	max = Factor * Sa * mu0^Power + Offset        W/m2
//
// Source: Long & Dutton 2002, BSRN Global Network recommended QC tests V2.0 (constants in rules.LimitTable). Valid for any
// zenith angle: below the horizon mu0 is nothing and the offset alone remains; with Power 0 the bound is the same day and
// night. Worked value: G possible, S0 1361, R 1, Z 60 degrees: 988.61.
func SunMax(l *rules.SunLimit, s *Sun) float64 {
	var p float64
	switch l.Power {
	case 1.2:
		p = s.Mu0Pow12
	case 0.2:
		p = s.Mu0Pow02
	case 1:
		p = s.Mu0
	case 0:
		p = 1
	default:
		if s.Mu0 > 0 {
			p = exact.Pow(s.Mu0, l.Power)
		}
	}
	return float64(l.Factor*s.SaWm2*p) + l.Offset
}

// WithinSun tests a shortwave value against a limit that follows the sun. The lower bound is lowWm2, which the caller widens
// by the zero offset that the instrument's class may have: a thermopile under a cold sky reads below nothing and is sound.
func WithinSun(v, lowWm2 float64, l *rules.SunLimit, s *Sun) rules.Outcome {
	if math.IsNaN(v) {
		return rules.NoValue
	}
	if v < lowWm2 || v > SunMax(l, s) {
		return rules.Miss
	}
	return rules.Pass
}

// WithinBand tests a value against constant bounds.
func WithinBand(v float64, b rules.Band) rules.Outcome {
	if math.IsNaN(v) {
		return rules.NoValue
	}
	if v < b.Low || v > b.High {
		return rules.Miss
	}
	return rules.Pass
}
