package rules

// A ClassLimits is what the class of an instrument promises: the acceptance limits of ISO 9060, each plus or minus.
type ClassLimits struct {
	Class              string  // "A", "B", "C"; a pyrheliometer also "AA"
	ZeroThermalWm2     float64 // zero offset a: at 200 W/m2 of net longwave; nothing for a pyrheliometer
	ZeroChangeWm2      float64 // zero offset b: while the temperature changes by 5 K an hour
	StabilityPercent   float64 // change of the sensitivity a year
	LinearityPercent   float64 // between 100 and 1000 W/m2
	DirectionalWm2     float64 // at a beam of 1000 W/m2 from any direction; nothing for a pyrheliometer
	SpectralPercent    float64 // clear-sky spectral error
	TemperaturePercent float64 // -10 to 40 degrees C, relative to 20
	TiltPercent        float64 // 0 to 180 degrees
	ProcessingWm2      float64 // additional signal processing error of an instrument with electronics of its own
	CalibrationPercent float64 // not of the standard: what is assumed of a certificate, k=2, that states no uncertainty
}

// pyranometerClasses is Table 1 of ISO 9060:2018, from memory; the last column is our own choice.
var pyranometerClasses = [...]ClassLimits{
	{"A", 7, 2, 0.8, 0.5, 10, 0.5, 1, 0.5, 2, 2},
	{"B", 15, 4, 1.5, 1, 20, 1, 2, 2, 5, 3},
	{"C", 30, 8, 3, 3, 30, 5, 4, 5, 10, 5},
}

// pyrheliometerClasses is assumed: Table 2 of ISO 9060:2018 as remembered and not checked against anything printed.
var pyrheliometerClasses = [...]ClassLimits{
	{"AA", 0, 0.1, 0.01, 0.01, 0, 0.01, 0.01, 0.01, 0.1, 0.5},
	{"A", 0, 1, 0.5, 0.2, 0, 0.2, 0.5, 0.2, 1, 1},
	{"B", 0, 3, 1, 0.5, 0, 1, 1, 0.5, 5, 1.5},
	{"C", 0, 6, 2, 2, 0, 2, 5, 2, 10, 2.5},
}

// PyranometerClass gives the limits of a pyranometer's class. One without a class is held to class C, and classified is false.
func PyranometerClass(class string) (limits ClassLimits, classified bool) {
	return classOf(pyranometerClasses[:], class)
}

// PyrheliometerClass gives the limits assumed of a pyrheliometer's class. One without a class is held to class C, and classified is
// false.
func PyrheliometerClass(class string) (limits ClassLimits, classified bool) {
	return classOf(pyrheliometerClasses[:], class)
}

func classOf(table []ClassLimits, class string) (ClassLimits, bool) {
	for i := range table {
		if table[i].Class == class {
			return table[i], true
		}
	}
	return table[len(table)-1], false
}
