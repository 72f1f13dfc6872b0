package uncertainty

import "fluxwarden/rules"

// A spectralKind is what is assumed of an instrument of a part of the spectrum, for which there is no class: all own choice.
type spectralKind struct {
	words                                                            string
	calibration, stability, spectral, directional, temperature, line float64 // percent; stability a year
	zero, processing                                                 float64 // in the quantity's unit
}

var (
	ultraviolet = spectralKind{"ultraviolet radiometer, limits assumed", 10, 3, 5, 5, 2, 1, 0.2, 0.1}
	quantum     = spectralKind{"quantum sensor, limits assumed", 5, 2, 3, 3, 1, 1, 3, 2}
)

// spectral adds the components of a uv or par instrument. The beam within its band is not known, so the directional response is of the value.
func (b *Budget) spectral(in *rules.Instrument, cal *rules.Calibration) {
	k := &ultraviolet
	if in.Measures == rules.PAR {
		k = &quantum
	}
	b.Class = k.words
	const assumed = "assumed"
	b.calibration(byValue, cal, k.calibration)
	b.share("non-stability since the calibration", byValueYears, k.stability, assumed, " a year")
	b.share("directional response", byValue, k.directional, assumed, "")
	b.share("temperature response", byValue, k.temperature, assumed, "")
	b.share("non-linearity", byValue, k.line, assumed, "")
	b.share("spectral", byValue, k.spectral, assumed, "")
	b.add("zero offset", byNothing, k.zero, Rectangular, assumed)
	b.logger(byValue, in, cal, k.processing, assumed)
}
