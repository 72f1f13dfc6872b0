package fault

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/sun"
)

// ineichen is the clear sky of the site's own turbidity: global horizontal and direct normal, W/m2.
func (b *Baseline) ineichen(m *Minute) (global, direct float64) {
	am := sun.AirMassKastenYoung(m.ZenithDeg) * b.pressure
	h := b.elevation
	fh1, fh2 := exact.Exp(-h/8000), exact.Exp(-h/1250)
	cg1, cg2 := float64(5.09e-5*h)+0.868, float64(3.92e-5*h)+0.0387
	global = cg1 * m.SaWm2 * m.Mu * exact.Exp(-cg2*am*(fh1+float64(fh2*(b.linke-1))))
	direct = (0.664 + 0.163/fh1) * m.SaWm2 * exact.Exp(-0.09*am*(b.linke-1))
	return global, direct
}

// linkeOf is the turbidity that makes the model's beam the measured one.
func (b *Baseline) linkeOf(v *view) float64 {
	am := sun.AirMassKastenYoung(v.zenithDeg) * b.pressure
	return 1 + exact.Log((0.664+0.163/exact.Exp(-b.elevation/8000))*v.sa/v.b())/(0.09*am)
}

// clearLongwave is the flux from a cloudless sky, W/m2, from air temperature (degrees C) and humidity (%); NaN without them.
func clearLongwave(airC, humidityPercent float64) float64 {
	if math.IsNaN(airC) || math.IsNaN(humidityPercent) {
		return math.NaN()
	}
	t := airC + 273.15
	e := humidityPercent / 100 * 6.112 * exact.Exp(17.62*airC/(243.12+airC))
	w := 46.5 * e / t
	return (1 - float64((1+w)*exact.Exp(-math.Sqrt(1.2+float64(3*w))))) * 5.670374419e-8 * t * t * t * t
}
