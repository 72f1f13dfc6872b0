package uncertainty

import (
	"fmt"
	"math"

	"fluxwarden/rules"
)

// The field of view that the reference instruments have, and how much of the beam a degree more or less adds of the light around the sun (own
// choice: hazy skies have more, clear ones less).
const (
	usualFieldDeg = 5
	fieldPercent  = 0.2
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
	switch fov := in.FieldOfView; {
	case fov == 0:
		b.Class += ", field of view not stated and taken as 5 degrees"
	default:
		b.Class += fmt.Sprintf(", field of view %g degrees", fov)
		if fov != usualFieldDeg {
			b.add("light around the sun", byValue, math.Abs(fov-usualFieldDeg)*fieldPercent*percent, Rectangular, fmt.Sprintf("0.2 %% a degree off 5, own choice; the field is %g", fov))
		}
	}
	if in.Window != "" {
		b.Class += ", window: " + in.Window
	}
	b.share("tilt response", byValue, l.TiltPercent, source, "")
	b.add("zero offset b", byNothing, l.ZeroChangeWm2, Rectangular, fmt.Sprintf("%s, %g W/m2 at 5 K an hour", source, l.ZeroChangeWm2))
	b.logger(byValue, in, cal, l.ProcessingWm2, source)
}
