package synth

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

// A device is one instrument with the small errors of its kind, fixed by the seed.
type device struct {
	rules       *rules.Instrument
	gain        float64 // what it makes of one watt
	directional float64 // W/m2 for each W/m2 of beam at a grazing angle
	east, north float64 // unit vector of the azimuth at which that error is greatest
	coolShare   float64 // of the detector's net longwave that shows as a zero offset
	noiseWm2    float64
	tauSeconds  float64 // response time to 1-1/e
	chance      source
}

// classErrors are the errors of a sound instrument of an ISO 9060:2018 class: well inside what the class allows (our own choice).
// An unclassified one is taken as class B.
type classErrors struct{ calibrationPercent, directional, coolShare, tauSeconds float64 }

func errorsOf(class string) classErrors {
	switch class {
	case "AA", "A":
		return classErrors{0.4, 0.0025, 0.016, 1.7}
	case "C":
		return classErrors{2, 0.01, 0.06, 6}
	}
	return classErrors{0.8, 0.005, 0.035, 4}
}

func newDevice(in *rules.Instrument, root source) device {
	d := device{rules: in, chance: root.named("device").named(in.ID)}
	e := errorsOf(in.Class)
	percent := e.calibrationPercent
	if n := len(in.Calibrations); n > 0 && in.Calibrations[n-1].UncertaintyPercent > 0 {
		percent = math.Min(percent, in.Calibrations[n-1].UncertaintyPercent/2) // what the certificate states is k = 2
	}
	trait := d.chance.named("traits")
	d.gain = 1 + clamp(trait.normal(0), -2, 2)*percent/100
	d.directional = e.directional * clamp(trait.normal(1), -2, 2)
	d.east, d.north = exact.Sincos(2 * math.Pi * trait.uniform(2))
	d.coolShare = e.coolShare * (1 + float64(0.15*trait.normal(3)))
	d.noiseWm2, d.tauSeconds = 0.25, e.tauSeconds
	switch q := in.Measures; {
	case q == rules.Direct:
		d.coolShare, d.directional, d.tauSeconds = 0.1*d.coolShare, 0, 1.5
	case q.Longwave():
		d.gain, d.directional, d.coolShare, d.tauSeconds = 1+float64(0.006*clamp(trait.normal(0), -2, 2)), 0, 0, 4
	case q == rules.UV:
		d.noiseWm2, d.coolShare = 0.01, 0
	case q == rules.PAR:
		d.noiseWm2, d.coolShare = 0.5, 0
	}
	return d
}

// calibration is the one that holds at a time, and the nearest where none does.
func (d *device) calibration(unixSeconds int64) *rules.Calibration {
	all := d.rules.Calibrations
	if len(all) == 0 {
		return nil
	}
	for i := len(all) - 1; i > 0; i-- {
		if unixSeconds >= all[i].From.Unix() {
			return &all[i]
		}
	}
	return &all[0]
}

// sees is the flux that a detector answers to, in the unit of its quantity, given what lies upon its dome.
func (d *device) sees(n *now, e *effects) float64 {
	beam, diffuse := float64(n.direct*e.beamPass), float64(n.diffuse*e.skyPass)
	switch q := d.rules.Measures; q {
	case rules.Direct:
		return beam * e.pointing
	case rules.Diffuse:
		return diffuse + float64(float64(beam*d.incidence(n, e))*e.beamIn)
	case rules.Reflected:
		return n.reflected * e.skyPass
	case rules.Global, rules.UV, rules.PAR:
		global := diffuse + float64(beam*d.incidence(n, e))
		switch q {
		case rules.UV:
			global *= uvShare(n)
		case rules.PAR:
			global *= parPerWatt
		}
		return global
	case rules.LWDown:
		return n.lwDown
	case rules.LWUp:
		return n.lwUp
	}
	return math.NaN()
}

// incidence is the cosine with which the beam meets the detector: its plane's, with its directional error in it.
func (d *device) incidence(n *now, e *effects) float64 {
	if n.mu <= 0 {
		return 0
	}
	cos := n.up
	if e.tiltDeg != 0 {
		sinT, cosT := exact.Sincos(e.tiltDeg * radPerDeg)
		sinA, cosA := exact.Sincos(e.towardsDeg * radPerDeg)
		level := float64(n.east*sinA) + float64(n.north*cosA)
		cos = float64(n.up*cosT) + float64(sinT*level)
	}
	sideways := float64(n.east*d.east) + float64(n.north*d.north)
	flat := 1 - float64(n.up*n.up)
	return math.Max(0, cos+float64(d.directional*float64(sideways*flat)*ramp(n.up, 0, 0.1)))
}

// bodies are the temperatures of a pyrgeometer's body and dome in degrees C: the sun warms them, an open sky cools the dome.
func bodies(n *now) (bodyC, domeC float64) {
	loss := sensor.BlackbodyFlux(n.airC+sensor.ZeroCelsiusK) - n.lwDown
	bodyC = n.airC + 0.2 + float64(0.0012*n.global) - float64(0.002*loss)
	return bodyC, bodyC + float64(0.0005*n.global) - float64(0.0025*loss)
}

// output is what an instrument puts out at an instant: microvolts, or its own unit where the logger converts.
func (d *device) output(n *now, e *effects) float64 {
	value := d.sees(n, e)
	cal := d.calibration(int64(n.seconds))
	bodyC, domeC := bodies(n)
	noise := float64(math.Sqrt(float64(d.noiseWm2*d.noiseWm2)+float64(e.noiseWm2*e.noiseWm2)) * d.chance.normal(int64(n.seconds*1000)))
	if d.rules.Measures.Longwave() {
		return d.pyrgeometer(value, bodyC, domeC, noise, cal, e)
	}
	airK := n.airC + sensor.ZeroCelsiusK
	cooled := (n.lwDown - sensor.BlackbodyFlux(airK)) * d.coolShare * e.cooling * e.skyPass
	if d.rules.Measures == rules.Reflected {
		cooled *= 0.1 // it faces the warm ground
	}
	value = float64(value*d.gain*e.gain) + cooled + noise + e.addWm2
	if e.open > 0 {
		value = float64(e.open * d.chance.normal(int64(n.seconds*1000)))
	}
	value = math.Min(value, e.clipWm2)
	if d.rules.Input.Signal == "" {
		return value * e.factor
	}
	radiometer := sensor.Radiometer{SensitivityUVPerWm2: cal.SensitivityUVPerW, ZeroOffsetWm2: cal.ZeroWm2}
	radiometer.Response.ReferenceC = 20
	copy(radiometer.Response.Coefficients[:], cal.TemperatureCoeff)
	return d.clipped(1000*radiometer.VoltageMV(value, n.airC)) * e.factor
}

// pyrgeometer turns a longwave flux round to the thermopile's voltage (the form of Philipona et al. 1995), or gives the flux
// where the logger converts. A wet dome lets only a part of the net exchange through: what it shows is its own temperature.
func (d *device) pyrgeometer(flux, bodyC, domeC, noise float64, cal *rules.Calibration, e *effects) float64 {
	bodyK, domeK := bodyC+sensor.ZeroCelsiusK, domeC+sensor.ZeroCelsiusK
	emitted := sensor.BlackbodyFlux(bodyK)
	k1, k2, k3, zero := 0.0, 1.0, 0.0, 0.0
	if cal != nil {
		k1, k2, k3, zero = cal.K1, cal.K2, cal.K3, cal.ZeroWm2
	}
	if d.rules.Input.Dome == "" {
		domeK = bodyK
	}
	own := float64(k2*emitted) - float64(k3*(sensor.BlackbodyFlux(domeK)-emitted))
	net := float64((flux-own)*d.gain*e.gain*e.netPass) + noise + e.addWm2 + zero
	if e.open > 0 {
		net = float64(e.open * noise)
	}
	if d.rules.Input.Signal == "" {
		return math.Min(net+own, e.clipWm2) * e.factor
	}
	net = math.Min(net, e.clipWm2-own)
	perWatt := 1 + float64(k1*sensor.StefanBoltzmann*bodyK*bodyK*bodyK)
	return d.clipped(net/perWatt*cal.SensitivityUVPerW) * e.factor
}

// clipped holds a voltage within the logger's range.
func (d *device) clipped(microvolts float64) float64 {
	per := microvoltsPer(d.rules.Input.SignalUnit)
	if low := d.rules.Input.SignalMin * per; microvolts < low {
		return low
	}
	if high := d.rules.Input.SignalMax * per; microvolts > high {
		return high
	}
	return microvolts
}

func microvoltsPer(unit string) float64 {
	switch unit {
	case "V":
		return 1e6
	case "uV":
		return 1
	}
	return 1e3
}
