package uncertainty

import "fluxwarden/rules"

// What is assumed of a pyrgeometer: there is no class of ISO 9060 for one.
const (
	pyrgeometerCalibrationPercent = 5    // k=2, of the net signal, where the certificate states none (own choice)
	pyrgeometerStabilityPercent   = 1    // a year (own choice)
	pyrgeometerLinearityPercent   = 1    // of the net signal (own choice)
	pyrgeometerTemperaturePercent = 2    // of the net signal (own choice)
	pyrgeometerTiltPercent        = 1    // of the net signal (own choice)
	pyrgeometerProcessingWm2      = 2    // of electronics of its own (own choice)
	bodyToleranceK                = 0.2  // of a thermistor's or platinum's temperature, with its reading (from memory)
	emissionCoefficient           = 8e-4 // of k2 (Groebner 2008, Appl. Opt. 47, 4441)
	domeCoefficient               = 0.03 // of k3 (the same)
	silicon                       = 4    // k of a silicon dome, 3.5 to 4 (Albrecht & Cox 1977)
	uncoupledDomeK                = 0.5  // how far an uncoupled dome stands off the body (own choice)
	coupledDomeWm2                = 2    // what is left of the dome's own emission in a coupled one under a clear sky (own choice)
	wisgWm2                       = 6    // WISG reads 2 to 6 W/m2 low under a clear sky (Groebner et al. 2014)
	unshadedWm2                   = 15   // at a beam of 1000 W/m2, 2.6 to 15 (tutorial of the IPC-XI)
	unshadedDomeWm2               = 2.6  // the lower end, where the dome's temperature is taken out (own reading)
)

// pyrgeometer adds the components of a longwave instrument, for the form of Philipona et al. 1995 (Appl. Opt. 34, 1598): what comes from the
// thermopile grows with its net signal, what comes from the temperatures with 4 sigma T^3. The uncertainty of k1 is taken as part of the
// sensitivity's, with which it was fitted.
func (b *Budget) pyrgeometer(in *rules.Instrument, cal *rules.Calibration) {
	b.Class = "pyrgeometer, limits assumed"
	k3 := cal.K3
	if in.Input.Signal == "" && in.Input.Dome != "" && k3 == 0 {
		k3 = silicon // the logger takes the dome out, by a coefficient that it does not tell
	}
	b.calibration(byNet, cal, pyrgeometerCalibrationPercent)
	b.share("non-stability since the calibration", byNetYears, pyrgeometerStabilityPercent, "assumed, of the net signal", " a year")
	b.share("temperature response", byNet, pyrgeometerTemperaturePercent, "assumed, of the net signal", "")
	b.share("non-linearity", byNet, pyrgeometerLinearityPercent, "assumed, of the net signal", "")
	b.share("tilt response", byNet, pyrgeometerTiltPercent, "assumed, of the net signal", "")
	b.add("emission of the body, k2", byEmission, emissionCoefficient, Rectangular, "Groebner 2008")
	b.add("body temperature", byBodyKelvin, bodyToleranceK*(cal.K2+k3), Rectangular, "0.2 K, from memory")
	b.dome(in, k3)
	if in.Measures == rules.LWDown && !in.Shaded {
		if k3 > 0 {
			b.add("unshaded: sun on the dome", byBeam, unshadedDomeWm2/1000, Rectangular, "2.6 W/m2 at 1000 of beam, dome temperature taken out")
		} else {
			b.add("unshaded: sun on the dome", byBeam, unshadedWm2/1000, Rectangular, "15 W/m2 at 1000 of beam")
		}
	}
	switch cal.Scale {
	case "SI":
	case "":
		b.add("scale", byClearness, wisgWm2, Rectangular, "not stated, taken as WISG: 6 W/m2 under a clear sky")
	default:
		b.add("scale", byClearness, wisgWm2, Rectangular, cal.Scale+": 6 W/m2 under a clear sky")
	}
	b.logger(byNet, in, cal, pyrgeometerProcessingWm2, "assumed")
}

// dome adds what the dome's own emission leaves.
func (b *Budget) dome(in *rules.Instrument, k3 float64) {
	switch {
	case k3 > 0 && in.Input.Dome != "":
		b.add("dome temperature", byDomeKelvin, bodyToleranceK*k3, Rectangular, "0.2 K, from memory")
		b.add("emission of the dome, k3", byDomeExchange, domeCoefficient, Rectangular, "Groebner 2008")
	case in.Input.Dome != "":
		b.add("uncoupled dome, not taken out", byBodyKelvin, silicon*uncoupledDomeK, Rectangular, "0.5 K off the body, assumed: no k3")
	default:
		b.add("dome, taken as coupled", byClearness, coupledDomeWm2, Rectangular, "2 W/m2 under a clear sky, assumed")
	}
}
