package table

import "fluxwarden/qc/engine"

// houseColumn is the place of `housekeeping_out`: listMinuteColumns sets it.
var houseColumn int

func appendHouse(list []Column) []Column {
	houseColumn = len(list)
	return append(list, Column{Name: "housekeeping_out", Kind: Text, Description: "housekeeping channels out of their sound range, ';' between"})
}

// houseOut writes what was out of its range from row `at` on; the column stays null where the station has no housekeeping.
func (t *Table) houseOut(at int, j *engine.Judged) {
	if j.HouseNames == nil {
		return
	}
	codes := t.codes(houseColumn)[at : at+j.Rows]
	v := &t.Vectors[houseColumn]
	last, code := uint32(0), v.code("")
	for r, out := range j.HouseOut[:j.Rows] {
		if out != last {
			last, code = out, v.code(j.HouseText(out))
		}
		codes[r] = code
	}
}
