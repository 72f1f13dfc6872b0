package sensor

import "math"

// Body and dome temperatures outside these bounds are not measurements.
const (
	pyrgeometerMinK = 170.0
	pyrgeometerMaxK = 350.0
)

// The thermopile signal is negative when the detector loses more than it gains, as under a
// clear sky. All forms take it as the net exchange U/C in W m-2, from NetExchange.

// NetExchange returns U/C in W m-2 from a thermopile voltage in microvolts and a sensitivity
// in microvolts per W m-2, which must be positive; else NaN.
func NetExchange(voltageUV, sensitivityUVPerWm2 float64) float64 {
	if !(sensitivityUVPerWm2 > 0) {
		return math.NaN()
	}
	return voltageUV / sensitivityUVPerWm2
}

// PyrgeometerSimple returns the incoming longwave in W m-2 of an instrument whose dome is
// held at body temperature: net + sigma Tb^4. Body temperature 170..350 K, else NaN.
// Worked value: 290.9185 at -400 uV, 4 uV/(W m-2), 288.15 K.
func PyrgeometerSimple(netWm2, bodyK float64) float64 {
	return netWm2 + pyrgeometerEmission(bodyK)
}

// PyrgeometerAlbrechtCox returns the incoming longwave in W m-2 with the dome's own emission
// taken out: net + sigma Tb^4 - k sigma (Td^4 - Tb^4), k 3.5 to 4 for silicon domes. A
// dome colder than the body raises the result. Temperatures 170..350 K, else NaN.
// Source: Albrecht and Cox 1977, J. Appl. Meteorol. 16, 188.
// Worked value: 301.7435 at -100 W m-2, body 288.15 K, dome 287.65 K, k 4.
func PyrgeometerAlbrechtCox(netWm2, bodyK, domeK, k float64) float64 {
	body, dome := pyrgeometerEmission(bodyK), pyrgeometerEmission(domeK)
	return netWm2 + body - float64(k*(dome-body))
}

// Philipona holds the coefficients of the three-coefficient form: K1 0..0.1 (dimensionless, of
// sigma Tb^3), K2 0.99..1.00, K3 2.5..4.
type Philipona struct{ K1, K2, K3 float64 }

// Flux returns the incoming longwave in W m-2:
// net (1 + K1 sigma Tb^3) + K2 sigma Tb^4 - K3 sigma (Td^4 - Tb^4). Temperatures 170..350 K,
// else NaN. With K1 = 0 and K2 = 1 it is the form of Albrecht and Cox.
// Source: Philipona, Froehlich and Betz 1995, Appl. Opt. 34, 1598.
func (p Philipona) Flux(netWm2, bodyK, domeK float64) float64 {
	body, dome := pyrgeometerEmission(bodyK), pyrgeometerEmission(domeK)
	gain := 1 + float64(p.K1*(body/bodyK))
	return float64(netWm2*gain) + float64(p.K2*body) - float64(p.K3*(dome-body))
}

// ThreeCoefficient is the form of certificates that give a responsivity and add the dome term:
// K1 U + K2 sigma Tc^4 + K3 sigma (Td^4 - Tc^4), K1 in W m-2 per microvolt, K3 negative.
// It equals Philipona{0, K2, -K3}.
type ThreeCoefficient struct{ K1Wm2PerUV, K2, K3 float64 }

// Flux returns the incoming longwave in W m-2 from the thermopile voltage in microvolts and the
// case and dome temperatures in K (170..350, else NaN).
func (c ThreeCoefficient) Flux(voltageUV, caseK, domeK float64) float64 {
	return c.FluxFromNet(float64(c.K1Wm2PerUV*voltageUV), caseK, domeK)
}

// FluxFromNet is Flux where the logger has turned the voltage into K1 U, in W m-2, already.
func (c ThreeCoefficient) FluxFromNet(netWm2, caseK, domeK float64) float64 {
	return Philipona{0, c.K2, -c.K3}.Flux(netWm2, caseK, domeK)
}

// DomeErrorPerKelvin returns by how many W m-2 the longwave errs for one kelvin of error in the
// dome's temperature: 4 k sigma T^3. Worked value: 21.71 for k 4 at 288.15 K.
func DomeErrorPerKelvin(k, temperatureK float64) float64 {
	return 4 * k * pyrgeometerEmission(temperatureK) / temperatureK
}

func pyrgeometerEmission(k float64) float64 {
	if !(k >= pyrgeometerMinK && k <= pyrgeometerMaxK) {
		return math.NaN()
	}
	return BlackbodyFlux(k)
}
