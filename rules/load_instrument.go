package rules

import (
	"math"
	"slices"
	"time"
)

func (r *reader) instrument(v *value, station string, use channelUse) Instrument {
	in := Instrument{ID: v.textAt("id", ""), Serial: v.textAt("serial", ""), Class: v.textAt("class", ""), Line: v.node.Line,
		Primary: v.given("primary") && v.at("primary").yes, Shaded: v.given("shaded") && v.at("shaded").yes}
	path := station + " instrument " + in.ID
	if !v.given("measures") {
		return in
	}
	in.Measures, _ = ParseQuantity(v.at("measures").text)
	switch {
	case in.Class == "":
	case in.Class == "AA" && in.Measures != Direct:
		r.problem(v.at("class").node, "write A, B or C", "%s: class AA is for pyrheliometers, which measure direct", path)
	case in.Measures.Longwave() || in.Measures == UV || in.Measures == PAR:
		r.warn(v.at("class").node, "leave it out", "%s: ISO 9060 has no class for %s", path, in.Measures)
	}
	if in.Shaded && !in.Measures.Longwave() {
		r.problem(v.at("shaded").node, "leave it out; a shaded pyranometer measures diffuse", "%s: shaded is for pyrgeometers", path)
	}
	for _, key := range []string{"signal", "irradiance", "case", "dome"} {
		r.take(use, v.at("input").at(key), station, "instrument "+in.ID+" "+key)
	}
	in.Input = r.input(v.at("input"), in.Measures, path)
	r.optics(v, path, &in)
	if v.given("thermal_offset") {
		if in.Offset = Off; v.at("thermal_offset").yes {
			in.Offset = On
		}
		if in.Measures != Global && in.Measures != Diffuse {
			r.problem(v.at("thermal_offset").node, "leave it out", "%s measures %s: a thermal offset is taken out of global and diffuse", path, in.Measures)
		}
	}
	r.status(v.at("status"), station, path, use, &in)
	in.Calibrations = r.calibrations(v.at("calibrations"), &in, v, path)
	return in
}

// Bounds of a thermistor's coefficients: parts of 100 ohm to 1 megohm at 25 degrees C lie well within them (own choice).
var thermistorBounds = [3][2]float64{{1e-5, 5e-3}, {5e-5, 1e-3}, {1e-9, 1e-5}}

// thermistor reads the curve of body temperatures that come in ohms.
func (r *reader) thermistor(v *value, path string, in *Input) {
	const example = "write the three coefficients of its certificate, such as thermistor: [1.0295e-3, 2.391e-4, 1.568e-7]"
	wanted := in.CaseUnit == "ohm_curve" || in.DomeUnit == "ohm_curve"
	switch {
	case wanted && !v.given("thermistor"):
		r.problem(v.node, example, "%s has a temperature in ohm_curve and no thermistor", path)
	case !wanted && v.given("thermistor"):
		r.problem(v.at("thermistor").node, "write case_unit: ohm_curve, or leave it out", "%s has a thermistor's curve and no temperature in ohm_curve", path)
	case wanted:
		for i, x := range v.at("thermistor").numbers {
			if b := thermistorBounds[i]; x < b[0] || x > b[1] {
				r.problem(v.at("thermistor").node, example, "%s thermistor: %c is %g: no thermistor has less than %g or more than %g", path, 'A'+i, x, b[0], b[1])
			}
			in.Thermistor[i] = x
		}
	}
}

func (r *reader) input(v *value, q Quantity, path string) Input {
	in := Input{Signal: v.textAt("signal", ""), Irradiance: v.textAt("irradiance", ""), SignalMin: math.NaN(), SignalMax: math.NaN(),
		Case: v.textAt("case", ""), Dome: v.textAt("dome", "")}
	if v == nil || !v.ok {
		return in
	}
	r.inputUnit(v, q, path, &in)
	for _, key := range []string{"case", "dome"} {
		switch {
		case v.at(key) != nil && !q.Longwave():
			r.problem(v.at(key).node, "leave it out", "%s measures %s: a %s temperature belongs to a pyrgeometer", path, q, key)
		case v.at(key) == nil && v.at(key+"_unit") != nil:
			r.problem(v.at(key+"_unit").node, "add "+key+": and its channel, or leave the unit out", "%s has a %s_unit without a %s", path, key, key)
		}
	}
	if in.Case != "" {
		in.CaseUnit = v.textAt("case_unit", "degC")
	}
	if in.Dome != "" {
		in.DomeUnit = v.textAt("dome_unit", "degC")
		if v.at("case") == nil {
			r.problem(v.at("dome").node, "add case: and its channel", "%s has a dome temperature but no case temperature", path)
		}
	}
	r.thermistor(v, path, &in)
	if q.Longwave() && v.at("signal") != nil && v.at("case") == nil && v.at("dome") == nil {
		r.problem(v.at("signal").node, "add case: and its channel", "%s is a pyrgeometer with a signal but no case temperature: the flux cannot be worked out", path)
	}
	if v.given("range") {
		in.SignalMin, in.SignalMax = v.at("range").numbers[0], v.at("range").numbers[1]
		if in.SignalMin >= in.SignalMax {
			r.problem(v.at("range").node, "write the smaller one first", "%s input range goes from %g to %g", path, in.SignalMin, in.SignalMax)
		}
	}
	return in
}

// inputUnit holds that there is one of signal and irradiance, in a unit that suits it.
func (r *reader) inputUnit(v *value, q Quantity, path string, in *Input) {
	signal, irradiance, unit := v.at("signal"), v.at("irradiance"), v.textAt("unit", "")
	voltage := unit == "mV" || unit == "uV" || unit == "V"
	switch {
	case signal != nil && irradiance != nil:
		r.problem(irradiance.node, "keep signal if the logger sends a voltage, irradiance if it converts", "%s has both a signal and an irradiance", path)
	case signal == nil && irradiance == nil:
		r.problem(v.node, "add signal: and unit:, or irradiance:", "%s has no signal and no irradiance", path)
	case signal != nil && v.at("unit") == nil:
		r.problem(signal.node, "add unit: mV, uV or V", "%s has a signal without a unit", path)
	case signal != nil && v.given("unit") && !voltage:
		r.problem(v.at("unit").node, "write mV, uV or V; or irradiance: instead of signal: where the logger converts", "%s has a signal in %s", path, unit)
	case irradiance != nil && v.given("unit") && unit != q.Unit():
		r.problem(v.at("unit").node, "leave the unit out; or write signal: instead of irradiance: for a voltage", "%s has an irradiance in %s, not %s", path, unit, q.Unit())
	case signal != nil:
		in.SignalUnit = unit
	}
}

// calibrations builds the history, sorted by its start, each period without an end closed by the next.
func (r *reader) calibrations(v *value, in *Instrument, whole *value, path string) []Calibration {
	if v == nil {
		if whole.at("input").at("signal") != nil {
			r.problem(whole.at("input").node, "add calibrations: with from, sensitivity and unit", "%s sends a voltage but has no calibration", path)
		}
		return nil
	}
	var list []Calibration
	for _, c := range v.items {
		if cal, ok := r.calibration(c, in, path); ok {
			list = append(list, cal)
		}
	}
	slices.SortStableFunc(list, func(a, b Calibration) int { return a.From.Compare(b.From) })
	for i := range list[:max(0, len(list)-1)] {
		a, b := &list[i], &list[i+1]
		at := byLine(v, b.Line)
		switch {
		case a.From.Equal(b.From):
			r.problem(at.node, "give them different starts, or keep one", "%s: the calibrations on lines %d and %d begin at the same time %s", path, a.Line, b.Line, stamp(b.From))
		case a.To.IsZero():
			a.To = b.From
		case a.To.After(b.From):
			r.problem(at.node, "end the first where the second begins, or leave its to: out", "%s: the calibrations on lines %d and %d overlap from %s to %s", path, a.Line, b.Line, stamp(b.From), stamp(a.To))
		case a.To.Before(b.From):
			r.problem(at.node, "let the second begin where the first ends, or leave the first one's to: out", "%s: the calibrations on lines %d and %d leave a hole from %s to %s", path, a.Line, b.Line, stamp(a.To), stamp(b.From))
		}
	}
	return list
}

func byLine(v *value, line int) *value {
	for _, c := range v.items {
		if c.node.Line == line {
			return c
		}
	}
	return v
}

func stamp(t time.Time) string {
	if t.Equal(t.Truncate(24 * time.Hour)) {
		return t.Format(time.DateOnly)
	}
	return t.Format(time.RFC3339)
}

func (r *reader) calibration(v *value, in *Instrument, path string) (Calibration, bool) {
	cal := Calibration{Serial: v.textAt("serial", in.Serial), UncertaintyPercent: v.numberAt("uncertainty", 0), Scale: v.textAt("scale", ""),
		Certificate: v.textAt("certificate", ""), K1: v.numberAt("k1", 0), K2: v.numberAt("k2", 1), K3: v.numberAt("k3", 0), ZeroWm2: v.numberAt("zero", 0), Line: v.node.Line}
	path += " calibration"
	if v.given("from") {
		cal.From = v.at("from").when
	}
	if v.given("to") {
		cal.To = v.at("to").when
		if v.given("from") && !cal.To.After(cal.From) {
			r.problem(v.at("to").node, "write the later one as to", "%s ends at %s, not after its start %s", path, stamp(cal.To), stamp(cal.From))
		}
	}
	if v.given("temperature") {
		cal.TemperatureCoeff = v.at("temperature").numbers
	}
	r.sensitivity(v, in, path, &cal)
	for _, key := range []string{"k1", "k2", "k3"} {
		if v.at(key) != nil && !in.Measures.Longwave() {
			r.problem(v.at(key).node, "leave it out", "%s has a %s, which belongs to a pyrgeometer", path, key)
		}
	}
	if in.Measures.Longwave() && in.Input.Signal != "" {
		switch {
		case cal.K3 != 0 && in.Input.Dome == "":
			r.problem(v.at("k3").node, "add dome: and its channel to the input, or leave k3 out", "%s has a k3 but the input has no dome temperature", path)
		case cal.K3 == 0 && in.Input.Dome != "":
			r.warn(v.node, "add k1, k2 and k3 from the certificate", "%s has no k3, so the dome temperature is not used", path)
		}
	}
	return cal, v.given("from")
}

// The span outside which a sensitivity is more likely a slip of the unit than a real one, uV/(W/m2): thermopile instruments
// have 3 to 20 (common practice); silicon and amplified ones have more and exist, so they are warned of, not refused.
const sensitivityUsualMin, sensitivityUsualMax = 1, 50

func (r *reader) sensitivity(v *value, in *Instrument, path string, cal *Calibration) {
	voltage := in.Input.Signal != ""
	value, unit := v.at("sensitivity"), v.at("unit")
	switch {
	case value == nil && voltage:
		r.problem(v.node, "add sensitivity: and unit: from the certificate", "%s has no sensitivity", path)
	case value == nil:
	case value.ok && value.number <= 0:
		r.problem(value.node, "write it as a number above zero; a reversed wire is mended at the terminal", "%s has the sensitivity %g", path, value.number)
	case unit == nil:
		r.problem(value.node, "add unit: uV/(W/m2)", "%s has a sensitivity without a unit", path)
	case value.ok && unit.ok:
		for _, u := range sensitivityTable {
			if u.name != unit.text {
				continue
			}
			cal.SensitivityUVPerW = value.number * u.toUV
			if u.ofPAR != (in.Measures == PAR) {
				r.problem(unit.node, "write the unit with "+in.Measures.Unit(), "%s has a sensitivity in %s for %s, which is in %s", path, u.name, in.Measures, in.Measures.Unit())
			}
		}
		switch s := cal.SensitivityUVPerW; {
		case !voltage:
			r.warn(value.node, "leave it out, or send the voltage", "%s has a sensitivity that is not used: the logger already converts", path)
		case in.Measures != PAR && in.Measures != UV && (s < sensitivityUsualMin || s > sensitivityUsualMax):
			r.warn(value.node, "check number and unit", "%s has the unusual sensitivity %g uV/(W/m2); thermopile instruments have 3 to 20", path, s)
		}
	}
}
