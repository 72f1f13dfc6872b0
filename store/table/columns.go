package table

import (
	"math"

	"fluxwarden/rules"
)

// Resolutions that stored values are rounded to. They are powers of two, so that the rounded value is exact and its last bits are
// zeros, which compress; each is finer than what the instruments resolve.
const (
	StepIrradiance = 1.0 / 64   // W/m2, umol/(m2 s), degC, %, m/s
	StepSpread     = 1.0 / 32   // standard deviations and uncertainties of them
	StepAngle      = 1.0 / 1024 // degrees
	StepPressure   = 1.0 / 16   // hPa
)

// Step is the resolution that the quantity's values are stored in.
func Step(q rules.Quantity) float64 {
	if q == rules.Pressure {
		return StepPressure
	}
	return StepIrradiance
}

// Round rounds to a multiple of the step, half to even, and never gives a negative zero. A value too large for the step to matter
// stays as it is, what is not finite becomes NaN, which is stored as null.
func Round(x, step float64) float64 {
	if step == 0 || math.Abs(x) >= 1<<40 {
		if math.IsInf(x, 0) {
			return math.NaN()
		}
		return x
	}
	return math.RoundToEven(x/step)*step + 0
}

// Offsets of a radiation quantity's columns from its first.
const (
	offValue = iota
	offVerdict
	offReasons
	offMeasured
	offU95
	offSD
	offMin
	offMax
	offN
	offMissed
	offPassed
	radiationWidth
	weatherWidth = 3
)

// Places of the columns that every minute has.
const (
	colTime = iota
	colRecords
	colZenith
	colApparent
	colAzimuth
	colExtraterrestrial
	colClearGlobal
	colClearDirect
	colClearDiffuse
	colClearLWDown
	colQuantities
)

// QuantityColumn is the place of the quantity's value in MinuteColumns; its verdict and reasons follow.
func QuantityColumn(q rules.Quantity) int {
	if int(q) < rules.RadiationCount {
		return colQuantities + int(q)*radiationWidth
	}
	return colQuantities + rules.RadiationCount*radiationWidth + (int(q)-rules.RadiationCount)*weatherWidth
}

var standardNames = [rules.QuantityCount]string{
	"surface_downwelling_shortwave_flux_in_air", "surface_direct_along_beam_shortwave_flux_in_air",
	"surface_diffuse_downwelling_shortwave_flux_in_air", "surface_upwelling_shortwave_flux_in_air",
	"surface_downwelling_longwave_flux_in_air", "surface_upwelling_longwave_flux_in_air", "",
	"surface_downwelling_photosynthetic_photon_flux_in_air",
	"air_temperature", "relative_humidity", "surface_air_pressure", "wind_speed"}

var longNames = [rules.QuantityCount]string{
	"global horizontal irradiance", "direct normal irradiance", "diffuse horizontal irradiance", "reflected (upwelling) shortwave irradiance",
	"downwelling longwave irradiance", "upwelling longwave irradiance", "ultraviolet irradiance", "photosynthetically active photon flux",
	"air temperature", "relative humidity over water", "pressure at the station", "wind speed"}

// MinuteColumns are the columns of `minutes`: the same in every file, and only ever added to at the end.
func MinuteColumns() []Column { return minuteColumns }

var minuteColumns = listMinuteColumns()

func listMinuteColumns() []Column {
	sun := func(name, unit, standard, long string, step float64) Column {
		return Column{Name: name, Unit: unit, StandardName: standard, Description: long, Kind: Double, Step: step}
	}
	list := []Column{
		{Name: "time", Unit: "microseconds since 1970-01-01 00:00:00Z", StandardName: "time", Kind: Time, Required: true,
			Description: "start of the minute, UTC"},
		{Name: "records", Unit: "1", Description: "stamps that fell into the minute", Kind: Int},
		sun("zenith_deg", "degree", "solar_zenith_angle", "zenith angle of the sun without air, mid-minute", StepAngle),
		sun("apparent_zenith_deg", "degree", "", "zenith angle of the sun with refraction, mid-minute", StepAngle),
		sun("azimuth_deg", "degree", "solar_azimuth_angle", "azimuth of the sun from north, clockwise, mid-minute", StepAngle),
		sun("extraterrestrial", "W m-2", "toa_incoming_shortwave_flux", "solar irradiance above the air, normal to the beam", StepIrradiance),
		sun("clear_global", "W m-2", "surface_downwelling_shortwave_flux_in_air_assuming_clear_sky", "global irradiance under a cloudless sky", StepIrradiance),
		sun("clear_direct", "W m-2", "", "direct normal irradiance under a cloudless sky", StepIrradiance),
		sun("clear_diffuse", "W m-2", "", "diffuse irradiance under a cloudless sky", StepIrradiance),
		sun("clear_lw_down", "W m-2", "surface_downwelling_longwave_flux_in_air_assuming_clear_sky", "downwelling longwave under a cloudless sky", StepIrradiance),
	}
	// CF's toa_incoming_shortwave_flux is on the horizontal plane, ours is normal to the beam: no standard name fits.
	list[colExtraterrestrial].StandardName = ""
	for q := rules.Quantity(0); int(q) < rules.QuantityCount; q++ {
		list = append(list, quantityColumns(q)...)
	}
	list = appendSecondary(list)
	list = appendBest(list)
	return appendHouse(list)
}

// udunits are the quantities' units in UDUNITS form.
var udunits = map[string]string{"W/m2": "W m-2", "umol/(m2 s)": "umol m-2 s-1", "degC": "degree_Celsius", "%": "percent", "hPa": "hPa", "m/s": "m s-1"}

func quantityColumns(q rules.Quantity) []Column {
	name, unit, long, step := q.String(), udunits[q.Unit()], longNames[q], Step(q)
	double := func(suffix, what string, step float64) Column {
		return Column{Name: name + suffix, Unit: unit, Description: long + ": " + what, Kind: Double, Step: step}
	}
	value := double("", "mean of the minute after corrections", step)
	value.StandardName = standardNames[q]
	list := []Column{value,
		{Name: name + "_verdict", Description: long + ": accepted, questioned, rejected or absent", StandardName: "quality_flag", Kind: Text},
		{Name: name + "_reasons", Description: long + ": tests missed, open faults that reach the minute and notes about it, ';' between", Kind: Text}}
	if int(q) >= rules.RadiationCount {
		return list
	}
	return append(list,
		double("_measured", "mean of the minute before any correction", step),
		double("_u95", "expanded uncertainty, 95 %", StepSpread),
		double("_sd", "standard deviation of the samples", StepSpread),
		double("_min", "least sample", step),
		double("_max", "largest sample", step),
		Column{Name: name + "_n", Unit: "1", Description: long + ": samples", Kind: Int},
		Column{Name: name + "_tests_missed", Unit: "1", Description: long + ": tests missed, a bit a test, see the metadata test_bits", Kind: Int},
		Column{Name: name + "_tests_passed", Unit: "1", Description: long + ": tests passed, a bit a test, see the metadata test_bits", Kind: Int})
}

// TestBits names the bits of the mask columns, from the lowest, with blanks between.
func TestBits() string {
	s := ""
	for t := rules.Test(0); t < rules.TestCount; t++ {
		if t > 0 {
			s += " "
		}
		s += t.String()
	}
	return s
}

// StepRatio is the resolution of what has no unit.
const StepRatio = 1.0 / 4096

// LongName says in words what a quantity is.
func LongName(q rules.Quantity) string { return longNames[q] }
