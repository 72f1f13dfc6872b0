package sensor

import "math"

// TemperatureResponse is how an instrument's sensitivity changes with its temperature, relative to
// the calibration: f(t) = 1 + c0 (t-ref) + c1 (t-ref)^2 + c2 (t-ref)^3, t in C, from its certificate.
// The zero value means no change.
type TemperatureResponse struct {
	ReferenceC   float64
	Coefficients [3]float64 // per K, per K^2, per K^3
}

// FactorAt returns f at a temperature in C. A factor outside 0.5..1.5 is no response of a
// radiometer but a unit slip in the coefficients, and gives NaN.
func (r TemperatureResponse) FactorAt(temperatureC float64) float64 {
	if r.Coefficients == [3]float64{} {
		return 1
	}
	d := temperatureC - r.ReferenceC
	c := r.Coefficients
	f := 1 + float64(d*(c[0]+float64(d*(c[1]+float64(d*c[2])))))
	if !(f >= 0.5 && f <= 1.5) {
		return math.NaN()
	}
	return f
}

// Radiometer is a calibrated thermopile that faces the sun or the sky: a pyranometer or a
// pyrheliometer.
type Radiometer struct {
	SensitivityUVPerWm2 float64 // microvolts per W m-2, positive; 4..20 for most
	ZeroOffsetWm2       float64 // what it reads in the dark, taken off
	Response            TemperatureResponse
}

// Irradiance returns W m-2 from a voltage in millivolts and the body's temperature in C (any value
// where there is no temperature response): 1000 U / (S f(t)) - offset. A sensitivity that is not
// positive gives NaN. Worked value: 1000 W m-2 at 10 mV and 10 uV/(W m-2).
// Source: ISO 9060:2018 and ISO 9847 define the sensitivity; common practice for the rest.
func (r Radiometer) Irradiance(voltageMV, bodyC float64) float64 {
	if !(r.SensitivityUVPerWm2 > 0) {
		return math.NaN()
	}
	return float64(1000*voltageMV)/(r.SensitivityUVPerWm2*r.Response.FactorAt(bodyC)) - r.ZeroOffsetWm2
}

// VoltageMV inverts Irradiance: the millivolts that a W m-2 puts out.
func (r Radiometer) VoltageMV(irradianceWm2, bodyC float64) float64 {
	if !(r.SensitivityUVPerWm2 > 0) {
		return math.NaN()
	}
	return (irradianceWm2 + r.ZeroOffsetWm2) * r.SensitivityUVPerWm2 * r.Response.FactorAt(bodyC) / 1000
}

// SensitivityLooksLikeUnitSlip reports whether a sensitivity in microvolts per W m-2 lies outside
// 1..50, where thermopiles lie. Silicon sensors have 60..200 and amplified ones 500 and more, so it
// is a warning and no refusal.
func SensitivityLooksLikeUnitSlip(sensitivityUVPerWm2 float64) bool {
	return !(sensitivityUVPerWm2 >= 1 && sensitivityUVPerWm2 <= 50)
}

// NetInfraredCorrection returns the irradiance in W m-2 with the thermal exchange of the
// detector taken out: (V - Rnet Wnet)/R, V in microvolts, R and Rnet in microvolts per W m-2,
// Wnet in W m-2 (negative under a clear sky).
// Source: ASTM G213-17 (equation from memory). Worked value: 1000.75 for 8000, 8, 0.04, -150.
func NetInfraredCorrection(voltageUV, sensitivityUVPerWm2, netSensitivityUVPerWm2, netInfraredWm2 float64) float64 {
	if !(sensitivityUVPerWm2 > 0) {
		return math.NaN()
	}
	return (voltageUV - float64(netSensitivityUVPerWm2*netInfraredWm2)) / sensitivityUVPerWm2
}
