package rules

// optics reads what is known of an instrument's optics: the shade ring of a diffuse, the directional response of a global, the window and
// field of view of a pyrheliometer.
func (r *reader) optics(v *value, path string, in *Instrument) {
	for _, c := range []struct {
		key string
		of  Quantity
	}{{"shade_ring", Diffuse}, {"directional", Global}, {"field_of_view", Direct}, {"window", Direct}} {
		if v.at(c.key) != nil && in.Measures != c.of {
			r.problem(v.at(c.key).node, "leave it out", "%s measures %s: %s belongs to an instrument for %s", path, in.Measures, c.key, c.of)
		}
	}
	if v.given("shade_ring") {
		if in.ShadeRing = v.at("shade_ring").numbers; len(in.ShadeRing) != 1 && len(in.ShadeRing) != 12 {
			r.problem(v.at("shade_ring").node, "write one factor, or twelve from January on", "%s shade_ring has %d factors", path, len(in.ShadeRing))
		}
	}
	in.FieldOfView, in.Window = v.numberAt("field_of_view", 0), v.textAt("window", "")
	if !v.given("directional") {
		return
	}
	for _, c := range v.at("directional").items {
		if !c.ok {
			continue
		}
		d := [2]float64{c.numbers[0], c.numbers[1]}
		if n := len(in.Directional); n > 0 && d[0] <= in.Directional[n-1][0] {
			r.problem(c.node, "sort the table by rising zenith angle, each once", "%s directional goes from %g to %g degrees", path, in.Directional[n-1][0], d[0])
		}
		if d[1] < directionalLeast || d[1] > directionalMost {
			r.problem(c.node, "write the response over the certificate's, about 1", "%s directional response at %g degrees is %g", path, d[0], d[1])
		}
		in.Directional = append(in.Directional, d)
	}
}

// A response outside is a slip of the pen: class C allows 3 % at right angles and sensors far worse are no pyranometers (own choice).
const directionalLeast, directionalMost = 0.5, 1.5
