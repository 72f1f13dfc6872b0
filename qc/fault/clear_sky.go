package fault

import (
	"fluxwarden/qc/sensor"
	"fluxwarden/qc/sky"
	"fluxwarden/qc/sun"
)

// ineichen is the clear sky of the site's own turbidity: global horizontal and direct normal, W/m2; both nothing where the
// model has no answer.
func (b *Baseline) ineichen(m *Minute) (global, direct float64) {
	out, _ := b.model.At(m.Mu, sun.AirMassKastenYoung(m.ZenithDeg)*b.pressure, m.SaWm2)
	return out.GlobalWm2, out.DirectWm2
}

// withLinke is the clear sky at another turbidity.
func (b *Baseline) withLinke(linke float64, v *view) (global, direct float64) {
	model := sky.NewIneichenSite(max(linke, 1), b.elevation)
	out, _ := model.At(v.mu, sun.AirMassKastenYoung(v.zenithDeg)*b.pressure, v.sa)
	return out.GlobalWm2, out.DirectWm2
}

// linkeOf is the turbidity that makes the model's beam the measured one.
func (b *Baseline) linkeOf(v *view) float64 {
	return sky.LinkeTurbidity(v.b(), sun.AirMassKastenYoung(v.zenithDeg)*b.pressure, b.elevation, v.sa)
}

// clearLongwave is the flux from a cloudless sky, W/m2, from air temperature (degrees C) and humidity (%), after Prata 1996;
// NaN without them.
func clearLongwave(airC, humidityPercent float64) float64 {
	return sky.LongwavePrata(airC+sensor.ZeroCelsiusK, sky.VapourPressure(airC, humidityPercent))
}
