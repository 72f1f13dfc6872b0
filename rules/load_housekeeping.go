package rules

// houseMore reads what only the long form of a housekeeping entry says.
func (r *reader) houseMore(more *value, path string, st *Station, in *HousekeepingInput) {
	if more == nil {
		return
	}
	if word := more.textAt("kind", ""); word != "" {
		for k, name := range houseNames {
			if name == word {
				in.Kind = HouseKind(k)
			}
		}
	}
	if more.given("values") {
		in.Values = more.at("values").numbers
		if more.at("low") != nil || more.at("high") != nil {
			r.problem(more.at("values").node, "keep values, or low and high", "%s has both sound values and a sound range", path)
		}
	}
	if of := more.at("of"); of != nil && of.ok {
		in.OfGiven = true
		for _, c := range of.items {
			if !c.ok {
				continue
			}
			known := false
			for i := range st.Instruments {
				known = known || st.Instruments[i].ID == c.text
			}
			if !known {
				r.problem(c.node, "write the id of one of the station's instruments", "%s is of %s, which the station does not have", path, short(c.text))
			}
			in.Of = append(in.Of, c.text)
		}
	}
}

// status reads what the bits of a digital instrument's status word mean.
func (r *reader) status(v *value, station, path string, use channelUse, in *Instrument) {
	if v == nil || !v.ok {
		return
	}
	r.take(use, v.at("channel"), station, "instrument "+in.ID+" status")
	in.Status = v.textAt("channel", "")
	bits := v.at("bits")
	if bits == nil {
		return
	}
	seen := map[int]int{}
	for _, c := range bits.items {
		if !c.ok || !c.given("bit") || !c.given("test") {
			continue
		}
		x := c.at("bit").number
		b := StatusBit{Bit: int(x), Clear: c.textAt("when", "set") == "clear"}
		b.Test, _ = ParseTest(c.at("test").text)
		switch first := seen[b.Bit]; {
		case x != float64(b.Bit):
			r.problem(c.at("bit").node, "write a whole number, 0 for the lowest bit", "%s status bit is %g", path, x)
		case first > 0:
			r.problem(c.node, "keep one of them", "%s status bit %d is there twice, first on line %d", path, b.Bit, first)
		}
		seen[b.Bit] = c.node.Line
		in.StatusBits = append(in.StatusBits, b)
	}
}
