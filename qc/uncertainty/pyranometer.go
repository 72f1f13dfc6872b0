package uncertainty

import (
	"fmt"
	"math"
	"slices"

	"fluxwarden/rules"
)

const percent = 0.01

// What a data logger adds to a voltage, plus or minus (own choice, after what loggers for thermopiles state: gain and offset over the
// temperatures of a year).
const (
	loggerGainPercent = 0.1
	loggerOffsetUV    = 5
)

// levellingDeg is how far from level a plane stands that is kept by its bubble (common practice). The beam then meets it under another
// angle: error = beam * sin(zenith) * tilt at worst.
const levellingDeg = 0.2

// zeroCorrectedShare is what is left of zero offset a where a zero is taken off: night and day differ (Sanchez et al. 2015, JTECH 32, 234), so
// half of it stays (own choice).
const zeroCorrectedShare = 0.5

// directionalCorrectedShare is what is left of the directional response where a table over the zenith angle is taken out: that over the azimuth stays
// (own choice).
const directionalCorrectedShare = 0.5

// shadeRingShare is how much of a shade ring's correction is not known: the sky is brighter near the sun, where the ring is (own choice).
const shadeRingShare = 0.25

// pyranometer adds the components of a thermopile that sees the hemisphere.
//
// The directional response of a class is stated for a beam of 1000 W/m2 from any direction, so it grows with the beam and not with its cosine.
// The same response to an even sky of irradiance D is at worst 2 D times that share, since the radiance D/pi, over all directions without their
// cosine, comes to 2 D; directions cancel in part, so it is taken as triangular.
func (b *Budget) pyranometer(in *rules.Instrument, cal *rules.Calibration) {
	l, classified := rules.PyranometerClass(in.Class)
	source := b.class("ISO 9060:2018 class "+l.Class, classified)
	b.calibration(byValue, cal, l.CalibrationPercent)
	b.share("non-stability since the calibration", byValueYears, l.StabilityPercent, source, " a year")
	if in.Measures == rules.Global {
		if len(in.Directional) > 0 {
			b.add("directional response, beam", byBeam, directionalCorrectedShare*l.DirectionalWm2/1000, Rectangular, fmt.Sprintf("%s, half of %g W/m2 at 1000 of beam: a table over zenith is taken out", source, l.DirectionalWm2))
		} else {
			b.add("directional response, beam", byBeam, l.DirectionalWm2/1000, Rectangular, fmt.Sprintf("%s, %g W/m2 at 1000 of beam", source, l.DirectionalWm2))
		}
		b.add("levelling", byBeamAslant, levellingDeg*(math.Pi/180), Rectangular, "0.2 degrees by the bubble, common practice")
	}
	b.add("directional response, sky", bySky, 2*l.DirectionalWm2/1000, Triangular, source+", the same over an even sky")
	if n := len(in.ShadeRing); n > 0 {
		most := slices.Max(in.ShadeRing)
		b.add("shade-ring correction", byValue, shadeRingShare*(most-1)/most, Rectangular, fmt.Sprintf("a quarter of the correction, factor %g: the sky is not even, own choice", most))
	}
	b.share("temperature response", byValue, l.TemperaturePercent, source, "")
	b.share("non-linearity", byValue, l.LinearityPercent, source, "")
	b.share("spectral", byValue, l.SpectralPercent, source, "")
	b.share("tilt response", byValue, l.TiltPercent, source, ": the attitude of the calibration is not known")
	if cal.ZeroWm2 != 0 {
		b.add("zero offset a", byInfrared, zeroCorrectedShare*l.ZeroThermalWm2, Rectangular, fmt.Sprintf("%s, half of %g W/m2 at 200 of net longwave: a zero is taken off", source, l.ZeroThermalWm2))
	} else {
		b.add("zero offset a", byInfrared, l.ZeroThermalWm2, Rectangular, fmt.Sprintf("%s, %g W/m2 at 200 of net longwave", source, l.ZeroThermalWm2))
	}
	b.add("zero offset b", byNothing, l.ZeroChangeWm2, Rectangular, fmt.Sprintf("%s, %g W/m2 at 5 K an hour", source, l.ZeroChangeWm2))
	b.logger(byValue, in, cal, l.ProcessingWm2, source)
}

// share adds a class limit in percent, rectangular, and says it beside the source.
func (b *Budget) share(name string, by driver, limitPercent float64, source, more string) {
	b.add(name, by, limitPercent*percent, Rectangular, fmt.Sprintf("%s, %g %%%s", source, limitPercent, more))
}

// class notes what was assumed of the class and gives the words for a row.
func (b *Budget) class(words string, classified bool) string {
	if b.Class = words; !classified {
		b.Class = "not classified: held to " + words
		return words + " (not classified)"
	}
	return words
}

// calibration adds the certificate's uncertainty, or what is assumed where it states none.
func (b *Budget) calibration(by driver, cal *rules.Calibration, assumedPercent float64) {
	if cal.UncertaintyPercent > 0 {
		b.add("calibration", by, cal.UncertaintyPercent*percent, Normal, fmt.Sprintf("certificate %g %%", cal.UncertaintyPercent))
		return
	}
	b.add("calibration", by, assumedPercent*percent, Normal, fmt.Sprintf("assumed %g %%: the site file states none", assumedPercent))
}

// logger adds what turns the signal into a number: a data logger behind a voltage, or the electronics of an instrument that converts.
func (b *Budget) logger(by driver, in *rules.Instrument, cal *rules.Calibration, processing float64, source string) {
	if in.Input.Signal == "" || !(cal.SensitivityUVPerW > 0) {
		b.add("signal processing", byNothing, processing, Rectangular, fmt.Sprintf("%s, %g %s", source, processing, in.Measures.Unit()))
		return
	}
	b.add("logger, gain", by, loggerGainPercent*percent, Rectangular, "0.1 %, assumed")
	b.add("logger, offset", byNothing, loggerOffsetUV/cal.SensitivityUVPerW, Rectangular, "5 uV, assumed")
}
