package uncertainty

import (
	"fmt"

	"fluxwarden/rules"
)

// pyrheliometer adds the components of a thermopile on a tracker that sees the sun alone. The class limits are assumed, see
// rules.PyrheliometerClass; the field of view is taken as the usual 5 degrees, so that the light around the sun is part of what is measured, and
// pointing as within the slope angle.
func (b *Budget) pyrheliometer(in *rules.Instrument, cal *rules.Calibration) {
	l, classified := rules.PyrheliometerClass(in.Class)
	source := b.class("pyrheliometer class "+l.Class+", limits assumed", classified)
	b.calibration(byValue, cal, l.CalibrationPercent)
	b.share("non-stability since the calibration", byValueYears, l.StabilityPercent, source, " a year")
	b.share("temperature response", byValue, l.TemperaturePercent, source, "")
	b.share("non-linearity", byValue, l.LinearityPercent, source, "")
	b.share("spectral", byValue, l.SpectralPercent, source, "")
	b.share("tilt response", byValue, l.TiltPercent, source, "")
	b.add("zero offset b", byNothing, l.ZeroChangeWm2, Rectangular, fmt.Sprintf("%s, %g W/m2 at 5 K an hour", source, l.ZeroChangeWm2))
	b.logger(byValue, in, cal, l.ProcessingWm2, source)
}
