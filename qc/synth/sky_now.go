package synth

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sensor"
)

// now is the true state of sky, air and ground at one instant. Irradiances are in W/m2.
type now struct {
	seconds         float64 // since 1970
	east, north, up float64
	mu              float64
	direct, diffuse float64 // direct is normal to the beam; diffuse is what a shaded pyranometer should see
	global          float64
	reflected       float64
	lwDown, lwUp    float64
	cover           float64
	airC            float64
	humidityPct     float64
	pressureHPa     float64
	windMs          float64
}

const emissivityGround = 0.97

// skyAt works out the state at an instant.
func (s *Station) skyAt(at minute.Stamp) now {
	m := at.Minute()
	f := float64(int64(at)-m*minute.MicrosPerMinute) / minute.MicrosPerMinute
	a, b := s.minuteState(m), s.minuteState(m+1)
	t := float64(at) / minute.MicrosPerSecond
	n := now{seconds: t, east: lerp(a.east, b.east, f), north: lerp(a.north, b.north, f), up: lerp(a.up, b.up, f), cover: lerp(a.cover, b.cover, f),
		airC: lerp(a.airC, b.airC, f), humidityPct: lerp(a.humidityPct, b.humidityPct, f), pressureHPa: lerp(a.pressureHPa, b.pressureHPa, f)}
	n.mu = math.Max(0, n.up)
	n.windMs = math.Max(0, lerp(a.windMs, b.windMs, f)*(1+float64(0.15*s.chance.wind.smooth(t, 8))))
	s.shortwave(&n, lerp(a.clearDirect, b.clearDirect, f), lerp(a.clearDiffuse, b.clearDiffuse, f), lerp(a.depth, b.depth, f))
	n.reflected = n.global * math.Min(0.92, a.albedo*(1.06-float64(0.12*n.mu)))
	s.longwave(&n, lerp(a.clearLW, b.clearLW, f), a.groundHeat)
	return n
}

// shortwave puts the clouds before the sun. A field of five octaves moves over the station; where it is higher than the
// cover asks for there is cloud, the thicker the further. Broken clouds brighten the sky, and a gap's edge most.
func (s *Station) shortwave(n *now, clearDirect, clearDiffuse, depth float64) {
	clearGlobal := clearDiffuse + float64(clearDirect*n.mu)
	if clearGlobal <= 0 {
		return
	}
	inside := -9.0 // how deep in a cloud, in standard deviations of the field
	switch {
	case n.cover >= 0.995:
		inside = 3
	case n.cover > 0.005:
		inside = quantile(n.cover) - s.field(n.seconds)
	}
	transmission := 1.0
	if inside > 0 {
		transmission = exact.Exp(-float64(inside*depth) * 0.7)
	}
	closed := 1 / (1 + float64(0.1*depth)) * (1 + float64(0.06*s.chance.field[1].smooth(n.seconds, 400)))
	beam := clearGlobal - clearDiffuse
	bright := float64(0.3 * beam * n.cover * (1 - n.cover))
	if inside > -0.5 && inside <= 0 {
		bright += float64(0.08 * beam * n.cover * ramp(inside, -0.5, -0.05))
	} else if inside > 0 {
		bright *= 1 - ramp(inside, 0, 1)
	}
	n.direct = clearDirect * transmission
	n.diffuse = float64(clearDiffuse*(1-n.cover)) + float64(clearGlobal*n.cover*closed) + bright
	n.global = n.diffuse + float64(n.direct*n.mu)
}

// fieldScalesSeconds and fieldWeights make the cloud field; the weights' squares add up to one.
var (
	fieldScalesSeconds = [...]float64{2700, 700, 180, 45, 12}
	fieldWeights       = [...]float64{0.74, 0.52, 0.35, 0.20, 0.12}
)

func (s *Station) field(seconds float64) float64 {
	var sum float64
	for i, scale := range fieldScalesSeconds {
		sum += float64(fieldWeights[i] * s.chance.field[i].smooth(seconds, scale))
	}
	return sum
}

// longwave: the cloudless sky's, a cloud base's where there is cloud, and the ground's, which the sun heats and the open sky cools.
func (s *Station) longwave(n *now, clearLW, groundHeat float64) {
	airK := n.airC + sensor.ZeroCelsiusK
	base := float64(0.985 * sensor.BlackbodyFlux(airK-s.climate.CloudBaseK))
	seen := clamp(n.cover*(1+float64(0.12*s.chance.field[0].smooth(n.seconds, 900))), 0, 1)
	n.lwDown = clearLW + float64(0.92*seen*math.Max(0, base-clearLW))
	taken := n.global - n.reflected
	groundK := airK + math.Min(18, float64(groundHeat*taken)) - float64(0.02*math.Max(0, sensor.BlackbodyFlux(airK)-n.lwDown))
	n.lwUp = float64(emissivityGround*sensor.BlackbodyFlux(groundK)) + float64((1-emissivityGround)*n.lwDown)
}
