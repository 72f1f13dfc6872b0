package uncertainty

import "fluxwarden/rules"

// pyrheliometer adds the components of a thermopile on a tracker that sees the sun alone. The class limits are assumed, see
// rules.PyrheliometerClass; the field of view is taken as the usual 5 degrees, so that the light around the sun is part of what is measured, and
// pointing as within the slope angle.
func (b *Budget) pyrheliometer(in *rules.Instrument, cal *rules.Calibration) {
	l, classified := rules.PyrheliometerClass(in.Class)
	source := b.class("pyrheliometer class "+l.Class+", limits assumed", classified)
	b.calibration(byValue, cal, l.CalibrationPercent)
	b.add("non-stability since the calibration", byValueYears, l.StabilityPercent*percent, Rectangular, source+", a year")
	b.add("temperature response", byValue, l.TemperaturePercent*percent, Rectangular, source)
	b.add("non-linearity", byValue, l.LinearityPercent*percent, Rectangular, source)
	b.add("spectral", byValue, l.SpectralPercent*percent, Rectangular, source)
	b.add("tilt response", byValue, l.TiltPercent*percent, Rectangular, source)
	b.add("zero offset b", byNothing, l.ZeroChangeWm2, Rectangular, source+", at 5 K an hour")
	b.logger(byValue, in, cal, l.ProcessingWm2, source)
}
