package rules

// This file declares every key of a site file once: its type, unit, range, default and meaning. The reader, the
// JSON Schema and the messages are made from it.

type kind uint8

const (
	textKind    kind = iota // any scalar
	nameKind                // text that follows a pattern
	choiceKind              // one of a list of words
	numberKind              // a finite number in a range
	percentKind             // 1.2%
	boolKind                // true or false
	timeKind                // a date (UTC midnight) or RFC 3339
	spanKind                // 60s
	numbersKind             // a list of numbers
	objectKind              // keys and values, the keys declared
	listKind                // a list of items
	mapKind                 // keys and values, the keys free within a pattern
	shortKind               // a channel's name, or an object with more about it
)

// A form is a pattern that names follow.
type form struct {
	pattern string // ECMA 262 and Go read it alike
	words   string // the same for a person
}

var (
	stationForm    = &form{`^[a-z0-9_-]{1,40}$`, "lower-case letters, digits, _ and -, at most 40"}
	instrumentForm = &form{`^[A-Za-z0-9_-]{1,40}$`, "letters, digits, _ and -, at most 40"}
	channelForm    = &form{`^[A-Za-z0-9_][A-Za-z0-9_.:/()%-]{0,63}$`, "letters, digits and _ . : / ( ) % -, at most 64, no space"}
	houseForm      = &form{`^[a-z0-9_]{1,40}$`, "lower-case letters, digits and _, at most 40"}
)

// A field is one key of the file, or the item of a list.
type field struct {
	key      string
	kind     kind
	required bool
	unit     string
	low      float64 // of a number, a percentage, a span (seconds) or each of a list's numbers
	high     float64
	form     *form
	choices  []string
	fallback string // the default as one would write it; empty if there is none
	doc      string
	item     *field  // of a list or map
	fields   []field // of an object, or of the long form of a short one
	least    int     // items of a list
	most     int
}

func (f *field) keys() []string {
	keys := make([]string, len(f.fields))
	for i := range f.fields {
		keys[i] = f.fields[i].key
	}
	return keys
}

func (f *field) find(key string) *field {
	for i := range f.fields {
		if f.fields[i].key == key {
			return &f.fields[i]
		}
	}
	return nil
}

var siteField = field{kind: objectKind, doc: "A network of radiation stations and the rules that hold for them.", fields: []field{
	{key: "network", kind: objectKind, required: true, doc: "The stations under one configuration.", fields: []field{
		{key: "id", kind: nameKind, required: true, form: stationForm, doc: "Short name of the network."},
		{key: "name", kind: textKind, doc: "Name for people."},
		{key: "contact", kind: textKind, doc: "Whom to ask about the data."},
		{key: "licence", kind: textKind, doc: "Under which terms the data may be used."},
		{key: "citation", kind: textKind, doc: "How the data are to be cited."},
	}},
	{key: "stations", kind: listKind, required: true, least: 1, most: 4096, doc: "The stations.", item: &stationField},
	{key: "rules", kind: objectKind, doc: "Overrides for every station.", fields: rulesFields},
}}

var rulesFields = []field{
	{key: "limits", kind: objectKind, doc: "Limits that differ from the published ones. A station's own go before the network's.", fields: limitFields()},
	{key: "tests", kind: listKind, least: 1, most: LocalTestsMax, doc: "Tests of one's own, in CEL. A station has its own and the network's.", item: &field{kind: objectKind, fields: []field{
		{key: "name", kind: nameKind, required: true, form: houseForm, doc: "Short name; it stands in the column local_missed."},
		{key: "of", kind: listKind, required: true, least: 1, most: QuantityCount, doc: "Quantities whose primary instrument the test is held against.",
			item: &field{kind: choiceKind, choices: quantityNames[:]}},
		{key: "miss", kind: textKind, required: true, doc: "Expression that is true where the test misses. It may name quantities and their _sd, _min and _max, zenith, azimuth, cos_zenith, extraterrestrial, clear_global, clear_direct, clear_diffuse, clear_lw_down, day_of_year, minute_of_day, and house_ with the name of a housekeeping channel. Where a value that it names is not there it does not apply."},
	}}},
	{key: "products", kind: objectKind, doc: "How the clean products are made. A station's own go before the network's.", fields: []field{
		{key: "night_negatives", kind: choiceKind, choices: []string{"keep", "zero"}, fallback: "keep",
			doc: "What becomes of shortwave values below zero while the sun is more than 3 degrees below the horizon: all are kept, or all are set to zero."},
	}},
}

// limitFields are the keys of the limit table.
func limitFields() []field {
	var fields []field
	for _, l := range buildLimitTable() {
		fields = append(fields, field{key: l.Key, kind: numberKind, unit: l.Unit, low: l.Low, high: l.High,
			fallback: formatNumber(l.Value), doc: "Source of the default: " + l.Source + "."})
	}
	return fields
}

var stationField = field{kind: objectKind, doc: "A place with a position and instruments.", fields: []field{
	{key: "id", kind: nameKind, required: true, form: stationForm, doc: "Short name; it stands in subjects, folder names and columns."},
	{key: "name", kind: textKind, doc: "Name for people."},
	{key: "latitude", kind: numberKind, required: true, unit: "degrees north", low: -90, high: 90, doc: "North is positive."},
	{key: "longitude", kind: numberKind, required: true, unit: "degrees east", low: -180, high: 180, doc: "East is positive."},
	{key: "elevation", kind: numberKind, required: true, unit: "m", low: -430, high: 9000, doc: "Height of the instruments above sea level."},
	{key: "time", kind: objectKind, doc: "How the logger stamps its records.", fields: []field{
		{key: "label", kind: choiceKind, choices: []string{"start", "end"}, fallback: "start", doc: "Which end of the interval the stamp is."},
		{key: "interval", kind: spanKind, unit: "s", low: 1, high: 60, fallback: "60s", doc: "Time between records; whole seconds that divide a minute."},
	}},
	{key: "horizon", kind: listKind, least: 1, most: 720, doc: "Corners of the horizon mask: [azimuth, elevation] in degrees, by rising azimuth from north, clockwise.",
		item: &field{kind: numbersKind, unit: "degrees", least: 2, most: 2, low: -10, high: 360}},
	{key: "instruments", kind: listKind, required: true, least: 1, most: 64, doc: "The radiation instruments.", item: &instrumentField},
	{key: "weather", kind: objectKind, doc: "The weather beside the radiation: a channel's name, or channel and unit.", fields: []field{
		weatherField("air_temperature", "degC", "K"),
		weatherField("humidity", "%", "1"),
		weatherField("pressure", "hPa", "Pa"),
		weatherField("wind_speed", "m/s"),
	}},
	{key: "housekeeping", kind: mapKind, form: houseForm, most: 32, doc: "Fans, supply, tracker and status words: a channel's name, or channel and sound range.",
		item: &field{kind: shortKind, form: channelForm, fields: []field{
			{key: "channel", kind: nameKind, required: true, form: channelForm, doc: "Channel that is read."},
			{key: "low", kind: numberKind, low: -1e9, high: 1e9, doc: "Least sound value, in the channel's own unit."},
			{key: "high", kind: numberKind, low: -1e9, high: 1e9, doc: "Largest sound value, in the channel's own unit."},
			{key: "values", kind: numbersKind, least: 1, most: 16, low: -1e9, high: 1e9, doc: "The only sound values, such as the modes in which a tracker follows the sun."},
			{key: "of", kind: listKind, most: 64, doc: "Instruments that a value out of the range is held against; without it those that the kind concerns.",
				item: &field{kind: nameKind, form: instrumentForm}},
			{key: "kind", kind: choiceKind, choices: houseNames[:], doc: "What the channel tells of; without it what the entry's name says: fan, tracker, supply, precipitation, or one of them with _ and more."},
		}}},
	{key: "sky", kind: objectKind, doc: "The clear-sky model and what it assumes where nothing is learnt yet.", fields: []field{
		{key: "model", kind: choiceKind, choices: []string{"bird", "ineichen", "solis"}, fallback: "bird", doc: "Bird & Hulstrom 1981, Ineichen & Perez 2002 or the simplified Solis (Ineichen 2008)."},
		{key: "ozone_cm", kind: numberKind, unit: "cm", low: 0.05, high: 0.7, doc: "Total ozone column (300 Dobson units are 0.3 cm)."},
		{key: "water_cm", kind: numberKind, unit: "cm", low: 0.01, high: 10, doc: "Precipitable water."},
		{key: "aod", kind: numberKind, unit: "1", low: 0, high: 5, doc: "Broadband aerosol optical depth."},
		{key: "albedo", kind: numberKind, unit: "1", low: 0, high: 1, doc: "Ground albedo."},
		{key: "monthly", kind: objectKind, doc: "Values by month, January first, in place of those above.", fields: []field{
			{key: "ozone_cm", kind: numbersKind, unit: "cm", low: 0.05, high: 0.7, least: 12, most: 12, doc: "Total ozone column."},
			{key: "water_cm", kind: numbersKind, unit: "cm", low: 0.01, high: 10, least: 12, most: 12, doc: "Precipitable water."},
			{key: "aod", kind: numbersKind, unit: "1", low: 0, high: 5, least: 12, most: 12, doc: "Broadband aerosol optical depth."},
			{key: "albedo", kind: numbersKind, unit: "1", low: 0, high: 1, least: 12, most: 12, doc: "Ground albedo."},
		}},
		{key: "channels", kind: objectKind, doc: "Channels that send such a value live; where one sends nothing, what stands above holds.", fields: []field{
			{key: "ozone_cm", kind: nameKind, form: channelForm, doc: "Total ozone column, cm."},
			{key: "water_cm", kind: nameKind, form: channelForm, doc: "Precipitable water, cm."},
			{key: "aod", kind: nameKind, form: channelForm, doc: "Broadband aerosol optical depth."},
			{key: "albedo", kind: nameKind, form: channelForm, doc: "Ground albedo."},
		}},
	}},
	{key: "rules", kind: objectKind, doc: "Overrides for this station.", fields: rulesFields},
	filesField, modbusField,
}}

func weatherField(key string, units ...string) field {
	return field{key: key, kind: shortKind, form: channelForm, doc: "Channel of this quantity.", fields: []field{
		{key: "channel", kind: nameKind, required: true, form: channelForm, doc: "Channel that is read."},
		{key: "unit", kind: choiceKind, choices: units, fallback: units[0], doc: "Unit of the channel."},
	}}
}

var temperatureUnits = []string{"degC", "K", "ohm_10k", "ohm_curve", "ohm_pt100"}

var instrumentField = field{kind: objectKind, doc: "One instrument, or the place of one: an exchange is a new serial in its calibrations.", fields: []field{
	{key: "id", kind: nameKind, required: true, form: instrumentForm, doc: "Short name within the station."},
	{key: "serial", kind: textKind, doc: "Serial number, for calibrations that do not state their own."},
	{key: "measures", kind: choiceKind, required: true, choices: quantityNames[:RadiationCount], doc: "The quantity."},
	{key: "class", kind: choiceKind, choices: []string{"AA", "A", "B", "C"}, doc: "Class after ISO 9060:2018; AA is for pyrheliometers."},
	{key: "primary", kind: boolKind, doc: "Of several that measure one quantity, the one whose value is used first."},
	{key: "shaded", kind: boolKind, fallback: "false", doc: "Whether a pyrgeometer is kept out of the sun's beam."},
	{key: "input", kind: objectKind, required: true, doc: "Which channels the instrument reads: signal (a voltage) or irradiance (the logger converts).", fields: []field{
		{key: "signal", kind: nameKind, form: channelForm, doc: "Channel of the voltage."},
		{key: "irradiance", kind: nameKind, form: channelForm, doc: "Channel that already holds the quantity in its own unit."},
		{key: "unit", kind: choiceKind, choices: []string{"mV", "uV", "V", "W/m2", "umol/(m2 s)"}, doc: "Unit of the signal."},
		{key: "case", kind: nameKind, form: channelForm, doc: "Channel of a pyrgeometer's body temperature."},
		{key: "case_unit", kind: choiceKind, choices: temperatureUnits, fallback: "degC", doc: "Unit of it; ohm_10k is a thermistor of 10 kilohm at 25 degrees C, ohm_curve one with the coefficients of thermistor, ohm_pt100 a platinum one (IEC 60751)."},
		{key: "dome", kind: nameKind, form: channelForm, doc: "Channel of a pyrgeometer's dome temperature."},
		{key: "dome_unit", kind: choiceKind, choices: temperatureUnits, fallback: "degC", doc: "Unit of it."},
		{key: "thermistor", kind: numbersKind, least: 3, most: 3, low: 0, high: 0.01, doc: "Coefficients A, B, C of Steinhart and Hart, 1/T = A + B ln R + C (ln R)^3 with T in kelvin and R in ohm, of temperatures in ohm_curve."},
		{key: "range", kind: numbersKind, least: 2, most: 2, low: -1e7, high: 1e7, doc: "Least and largest value the logger can give, in the unit of the signal."},
	}},
	{key: "shade_ring", kind: numbersKind, least: 1, most: 12, low: 1, high: 1.5, doc: "Factor that a diffuse under a shade ring is multiplied by: one, or twelve from January on."},
	{key: "directional", kind: listKind, least: 2, most: 40, doc: "Directional response of a global instrument: [zenith angle in degrees, response over the certificate's], by rising angle.",
		item: &field{kind: numbersKind, least: 2, most: 2, low: 0, high: 90}},
	{key: "field_of_view", kind: numberKind, unit: "degrees", low: 0.5, high: 20, doc: "Full opening angle of a pyrheliometer; 5 degrees is usual."},
	{key: "window", kind: choiceKind, choices: []string{"none", "quartz", "sapphire", "glass"}, doc: "Window of a pyrheliometer."},
	{key: "thermal_offset", kind: boolKind, doc: "Whether the thermal offset of a global or diffuse instrument is taken out by the net longwave beside it (Dutton et al. 2001), as fitted on the station's own nights. Without it: where a pyrgeometer for lw_down sends its own signal."},
	{key: "status", kind: objectKind, doc: "The status word of a digital instrument.", fields: []field{
		{key: "channel", kind: nameKind, required: true, form: channelForm, doc: "Channel of the word, a whole number of at most 32 bits."},
		{key: "bits", kind: listKind, required: true, least: 1, most: 32, doc: "What the bits mean.", item: &field{kind: objectKind, fields: []field{
			{key: "bit", kind: numberKind, required: true, low: 0, high: 31, doc: "Number of the bit; 0 is the lowest."},
			{key: "test", kind: choiceKind, required: true, choices: statusTests, doc: "The test that misses: signal rejects the value, the others question or report."},
			{key: "when", kind: choiceKind, choices: []string{"set", "clear"}, fallback: "set", doc: "Which state of the bit makes it miss."},
		}}},
	}},
	{key: "calibrations", kind: listKind, least: 1, most: 200, doc: "The calibration history.", item: &calibrationField},
}}

var calibrationField = field{kind: objectKind, doc: "One period of the history. Without `to` it ends where the next begins.", fields: []field{
	{key: "from", kind: timeKind, required: true, doc: "First instant, a date (UTC midnight) or RFC 3339 with a zone."},
	{key: "to", kind: timeKind, doc: "End, not included."},
	{key: "serial", kind: textKind, doc: "Serial number of the device in this period."},
	{key: "sensitivity", kind: numberKind, low: -1e9, high: 1e9, doc: "Signal for each unit of the quantity; above zero."},
	{key: "unit", kind: choiceKind, choices: sensitivityUnits(), doc: "Unit of the sensitivity; required with it."},
	{key: "uncertainty", kind: percentKind, low: 0, high: 50, unit: "%", doc: "Expanded uncertainty of the sensitivity, k=2."},
	{key: "scale", kind: choiceKind, choices: []string{"WRR", "WISG", "SI"}, doc: "Scale that the calibration is traceable to."},
	{key: "certificate", kind: textKind, doc: "Number of the certificate, or where it lies."},
	{key: "k1", kind: numberKind, low: -1, high: 1, fallback: "0", doc: "Pyrgeometer coefficient k1 (Philipona et al. 1995)."},
	{key: "k2", kind: numberKind, low: 0.9, high: 1.1, fallback: "1", doc: "Pyrgeometer coefficient k2."},
	{key: "k3", kind: numberKind, low: -1, high: 10, fallback: "0", doc: "Pyrgeometer coefficient k3, on the dome; it needs a dome temperature."},
	{key: "zero", kind: numberKind, unit: "W/m2", low: -50, high: 50, fallback: "0", doc: "Subtracted after the conversion, in the quantity's unit."},
	{key: "temperature", kind: numbersKind, unit: "1/K, 1/K2, ...", least: 1, most: 3, low: -0.1, high: 0.1,
		doc: "Coefficients a, b, ... of the response: sensitivity times 1 + a (T-20) + b (T-20)^2 + ..., T in degrees C."},
}}

type sensitivityUnit struct {
	name  string
	toUV  float64 // uV of one
	ofPAR bool
}

var sensitivityTable = []sensitivityUnit{
	{"uV/(W/m2)", 1, false}, {"mV/(W/m2)", 1e3, false}, {"V/(W/m2)", 1e6, false},
	{"uV/(umol/(m2 s))", 1, true}, {"mV/(umol/(m2 s))", 1e3, true}, {"V/(umol/(m2 s))", 1e6, true},
}

func sensitivityUnits() []string {
	var names []string
	for _, u := range sensitivityTable {
		names = append(names, u.name)
	}
	return names
}
