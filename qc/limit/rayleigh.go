package limit

import (
	"math"

	"fluxwarden/qc/sky"
	"fluxwarden/rules"
)

// rayleighDiffuseShare is the diffuse fraction from which on the sky is too cloudy for the limit to mean anything.
const rayleighDiffuseShare = 0.80

// Rayleigh tests diffuse against what the air's molecules alone scatter: under it lies a thermal offset that is not corrected, or a shade that
// hides more than the sun.
//
//	D >= RL(mu, P) Sa/1361 - below - allowance,  where D/(B mu + D) < 0.80 and B mu + D > 50 W/m2
//
// RL is sky.RayleighLimit, made for the sun's mean distance. Source: Long & Shi 2008 (from memory). Deviation: the zero offset that the
// instrument's class may have is allowed, in W/m2. Not applicable without direct, with the sun too low for the fit, behind the horizon mask
// or covered by the moon.
func Rayleigh(b, d, pressureHPa, allowanceWm2 float64, eclipsed bool, s *Sun, l *rules.Limits) rules.Outcome {
	switch {
	case math.IsNaN(d):
		return rules.NoValue
	case math.IsNaN(b):
		return rules.NoPartner
	case s.Hidden:
		return rules.SunHidden
	case eclipsed:
		return rules.EclipseNow
	}
	low := sky.RayleighLimit(s.Mu0, pressureHPa)
	if low != low {
		return rules.SunTooLow
	}
	sum := float64(b*s.BeamMu) + d
	if sum <= 50 || d >= float64(rayleighDiffuseShare*sum) {
		return rules.TooSmall
	}
	if d < float64(low*s.SaWm2)/1361-l.RayleighBelowWm2-allowanceWm2 {
		return rules.Miss
	}
	return rules.Pass
}
