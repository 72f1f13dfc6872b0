package table

import "fluxwarden/qc/engine"

// The place of `housekeeping_out`, behind which stands `local_missed`: listMinuteColumns sets it.
var houseColumn int

func appendHouse(list []Column) []Column {
	houseColumn = len(list)
	return append(list, Column{Name: "housekeeping_out", Kind: Text, Description: "housekeeping channels out of their sound range, ';' between"},
		Column{Name: "local_missed", Kind: Text, Description: "tests of the station's own that missed, ';' between"})
}

// houseOut writes what was out of its range, and which of the station's own tests missed, from row `at` on; the columns stay null where the
// station has none.
func (t *Table) houseOut(at int, j *engine.Judged) {
	if j.HouseNames != nil {
		t.named(houseColumn, at, j.HouseOut[:j.Rows], j.HouseText)
	}
	if j.LocalNames != nil {
		t.named(houseColumn+1, at, j.LocalOut[:j.Rows], j.LocalText)
	}
}

// named writes the names of sets of bits.
func (t *Table) named(column, at int, sets []uint32, text func(uint32) string) {
	codes := t.codes(column)[at : at+len(sets)]
	v := &t.Vectors[column]
	last, code := uint32(0), v.code("")
	for r, set := range sets {
		if set != last {
			last, code = set, v.code(text(set))
		}
		codes[r] = code
	}
}
