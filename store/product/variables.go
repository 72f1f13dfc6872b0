package product

import (
	"fluxwarden/rules"
	"fluxwarden/store/table"
)

// Version is raised when the products of the same minutes change.
const Version = 1

// A variable is what the products hold means of. The quantities come first, in their order; then what is derived.
type variable struct {
	name, unit, standard, long string
	step                       float64
	shortwave                  bool // is nothing while the sun is down
	uncertain                  bool // has an expanded uncertainty
}

const (
	vShortwaveDown = rules.QuantityCount + iota
	vNetShortwave
	vNetLongwave
	vNet
	vCloudGlobal
	vCloudLongwave
	vCloudNet
	vSunshine
	meanCount // those above have means, those below are ratios of sums
)

const (
	vAlbedo = meanCount + iota
	vDiffuseFraction
	vClearness
	hourCount // those above are in all products, those below in minutes only
)

const (
	vSkyEmissivity = hourCount + iota
	vSkyTemperature
	variableCount
)

var variables = listVariables()

// listVariables has the CF standard names from memory.
func listVariables() [variableCount]variable {
	var list [variableCount]variable
	for q := rules.Quantity(0); int(q) < rules.QuantityCount; q++ {
		c := table.MinuteColumns()[table.QuantityColumn(q)]
		list[q] = variable{name: q.String(), unit: c.Unit, standard: c.StandardName, long: table.LongName(q), step: c.Step, shortwave: q.Shortwave(),
			uncertain: int(q) < rules.RadiationCount}
	}
	flux := func(name, standard, long string, shortwave, uncertain bool) variable {
		return variable{name, "W m-2", standard, long, table.StepIrradiance, shortwave, uncertain}
	}
	ratio := func(name, standard, long string) variable {
		return variable{name: name, unit: "1", standard: standard, long: long, step: table.StepRatio}
	}
	list[vShortwaveDown] = flux("shortwave_down", "surface_downwelling_shortwave_flux_in_air", "downwelling shortwave: direct on the horizontal plus diffuse, "+
		"or global where they are not both accepted", true, true)
	list[vNetShortwave] = flux("net_shortwave", "surface_net_downward_shortwave_flux", "net shortwave: shortwave_down less reflected", true, true)
	list[vNetLongwave] = flux("net_longwave", "surface_net_downward_longwave_flux", "net longwave: lw_down less lw_up", false, true)
	list[vNet] = flux("net_radiation", "surface_net_downward_radiative_flux", "net radiation: net shortwave and net longwave", false, true)
	list[vCloudGlobal] = flux("cloud_global", "", "what the sky gives of downwelling shortwave beyond a cloudless one", true, false)
	list[vCloudLongwave] = flux("cloud_longwave", "", "what the sky gives of downwelling longwave beyond a cloudless one", false, false)
	list[vCloudNet] = flux("cloud_net", "", "cloud_global less its reflected share, and cloud_longwave", false, false)
	list[vSunshine] = ratio("sunshine", "", "share of the minutes in which the direct is 120 W/m2 or more")
	list[vSunshine].shortwave = true
	list[vAlbedo] = ratio("albedo", "surface_albedo", "reflected over shortwave_down, sun above 5 degrees")
	list[vDiffuseFraction] = ratio("diffuse_fraction", "", "diffuse over shortwave_down, sun above 5 degrees")
	list[vClearness] = ratio("clearness_index", "", "shortwave_down over extraterrestrial on the horizontal, sun above 5 degrees")
	list[vSkyEmissivity] = ratio("sky_emissivity", "", "lw_down over a black body's flux at air temperature")
	list[vSkyTemperature] = variable{name: "sky_temperature", unit: "degree_Celsius", long: "temperature of the black body that gives lw_down", step: table.StepIrradiance}
	return list
}

// A layout is the columns of a product and where a variable's are.
type layout struct {
	columns []table.Column
	at      [variableCount]map[string]int
}

func (l *layout) add(c table.Column) { l.columns = append(l.columns, c) }

func (l *layout) addOf(v int, suffix string, c table.Column) {
	if l.at[v] == nil {
		l.at[v] = map[string]int{}
	}
	l.at[v][suffix] = len(l.columns)
	c.Name = variables[v].name + suffix
	c.Description = variables[v].long + ": " + c.Description
	l.columns = append(l.columns, c)
}

func (l *layout) addValue(v int, what string) {
	x := &variables[v]
	l.addOf(v, "", table.Column{Unit: x.unit, StandardName: x.standard, Description: what, Kind: table.Double, Step: x.step})
}

const timeUnit = "microseconds since 1970-01-01 00:00:00Z"

func startOf(period string) table.Column {
	return table.Column{Name: "time", Unit: timeUnit, StandardName: "time", Kind: table.Time, Required: true, Description: "start of the " + period + ", UTC"}
}

var minuteLayout, hourLayout, dayLayout, monthLayout = layoutOfMinutes(), layoutOf(Hour), layoutOf(Day), layoutOf(Month)

const (
	sourceColumn = 2 // of shortwave_down, in minutes
	zenithColumn = 1
	lengthColumn = 1 // minutes in the period, in the other products
)

func layoutOfMinutes() *layout {
	l := &layout{}
	l.add(startOf("minute"))
	l.add(table.Column{Name: "zenith_deg", Unit: "degree", StandardName: "solar_zenith_angle", Description: "zenith angle of the sun without air, mid-minute",
		Kind: table.Double, Step: table.StepAngle})
	l.add(table.Column{Name: "shortwave_down_source", Description: "where shortwave_down is from: parts (direct and diffuse) or global", Kind: table.Text})
	for v := range variableCount {
		l.addValue(v, "mean of the minute, where accepted")
		if variables[v].uncertain {
			l.addOf(v, "_u95", table.Column{Unit: variables[v].unit, Description: "expanded uncertainty, 95 %", Kind: table.Double, Step: table.StepSpread})
		}
	}
	return l
}

// layoutOf gives the columns of the products of longer periods.
func layoutOf(p Period) *layout {
	l := &layout{}
	l.add(startOf(p.String()))
	l.add(table.Column{Name: "minutes", Unit: "1", Description: "minutes in the " + p.String(), Kind: table.Int})
	count := func(v int, suffix, what string) {
		l.addOf(v, suffix, table.Column{Unit: "1", Description: what, Kind: table.Int})
	}
	for v := range hourCount {
		x := &variables[v]
		double := func(suffix, what string, step float64) {
			l.addOf(v, suffix, table.Column{Unit: x.unit, Description: what, Kind: table.Double, Step: step})
		}
		if v >= meanCount {
			l.addValue(v, "ratio of sums over the "+p.String())
			count(v, "_n", "minutes that it stands on")
			continue
		}
		l.addValue(v, "mean of the "+p.String()+", where it stands on enough")
		count(v, "_n", "accepted minutes that it stands on")
		if x.uncertain {
			double("_u95", "expanded uncertainty of the mean, 95 %", table.StepSpread)
		}
		if p == Hour {
			double("_sd", "standard deviation of the accepted minutes", table.StepSpread)
		}
		double("_min", "least accepted minute", x.step)
		double("_max", "largest accepted minute", x.step)
		if v < rules.QuantityCount {
			count(v, "_questioned", "questioned minutes, left out")
			count(v, "_rejected", "rejected minutes, left out")
		}
		switch p {
		case Day:
			count(v, "_hours", "hours with a mean, of 24")
			if x.shortwave {
				count(v, "_hours_dark", "hours without one that count as nothing: the sun was not above 5 degrees")
			}
		case Month:
			count(v, "_days", "days with a mean")
			count(v, "_quarters", "quarters of an hour with enough data, of 96")
		}
	}
	return l
}

// MinuteColumns, HourColumns, DayColumns and MonthColumns are the columns of the products: the same in every file, and only ever added to at the end.
func MinuteColumns() []table.Column { return minuteLayout.columns }
func HourColumns() []table.Column   { return hourLayout.columns }
func DayColumns() []table.Column    { return dayLayout.columns }
func MonthColumns() []table.Column  { return monthLayout.columns }

// Names lists what the products hold: the quantities, then what is derived of them.
func Names() []string {
	var list []string
	for i := range variables {
		list = append(list, variables[i].name)
	}
	return list
}
