// Package rules holds what people write down: the words of the trade that the program uses, site files,
// published limits with their sources, the fault catalogue and the verdict table. It imports nothing of ours.
package rules

import "fmt"

// A Quantity is what an instrument measures, or the weather beside it. The list is closed and only grows at its end.
type Quantity uint8

const (
	Global         Quantity = iota // global horizontal irradiance, W/m2
	Direct                         // direct normal irradiance, W/m2
	Diffuse                        // diffuse horizontal irradiance, W/m2
	Reflected                      // reflected (upwelling) shortwave irradiance, W/m2
	LWDown                         // downwelling longwave irradiance, W/m2
	LWUp                           // upwelling longwave irradiance, W/m2
	UV                             // ultraviolet irradiance, W/m2
	PAR                            // photosynthetically active radiation as a photon flux, umol/(m2 s)
	AirTemperature                 // degrees C
	Humidity                       // relative humidity over water, %
	Pressure                       // station pressure, hPa
	WindSpeed                      // m/s
	QuantityCount  = iota
)

// RadiationCount is how many of the quantities are radiation: those below AirTemperature.
const RadiationCount = int(AirTemperature)

var quantityNames = [QuantityCount]string{"global", "direct", "diffuse", "reflected", "lw_down", "lw_up", "uv", "par",
	"air_temperature", "humidity", "pressure", "wind_speed"}

var quantityUnits = [QuantityCount]string{"W/m2", "W/m2", "W/m2", "W/m2", "W/m2", "W/m2", "W/m2", "umol/(m2 s)", "degC", "%", "hPa", "m/s"}

func (q Quantity) String() string {
	if int(q) < QuantityCount {
		return quantityNames[q]
	}
	return fmt.Sprintf("quantity(%d)", uint8(q))
}

// Unit is the unit that the archive stores the quantity in.
func (q Quantity) Unit() string { return quantityUnits[q] }

// Shortwave says whether the quantity goes to nothing at night.
func (q Quantity) Shortwave() bool {
	return q == Global || q == Direct || q == Diffuse || q == Reflected || q == UV || q == PAR
}

// Longwave says whether a pyrgeometer measures it.
func (q Quantity) Longwave() bool { return q == LWDown || q == LWUp }

// ParseQuantity gives the quantity of a name; ok is false for a name that is not in the list.
func ParseQuantity(name string) (q Quantity, ok bool) {
	for i, n := range quantityNames {
		if n == name {
			return Quantity(i), true
		}
	}
	return 0, false
}
