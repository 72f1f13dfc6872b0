package table

import (
	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// FromJudged gives the rows that the archive stores of a judged day, rounded. Of a quantity with
// more than two instruments the primary and the first other are stored.
func FromJudged(j *engine.Judged) *Table {
	t := NewMinutes(j.Rows)
	Append(t, j, 0)
	return t
}

// NewMinutes makes a table of minutes with all values null.
func NewMinutes(rows int) *Table {
	t := &Table{Columns: minuteColumns, Vectors: make([]Vector, len(minuteColumns)), Rows: rows}
	t.Vectors[colTime].Times = make([]int64, rows)
	return t
}

// Append writes the judged day into the table from row `at` on, rounded. The table must have room for its rows.
func Append(t *Table, j *engine.Judged, at int) {
	n := j.Rows
	for r := range n {
		t.Vectors[colTime].Times[at+r] = (j.Day*minute.PerDay + int64(r)) * minute.MicrosPerMinute
	}
	rec := t.ints(colRecords)[at : at+n]
	for r := range n {
		rec[r] = int32(j.Records[r])
	}
	t.round(colZenith, at, j.ZenithDeg[:n])
	t.round(colApparent, at, j.ApparentZenithDeg[:n])
	t.round(colAzimuth, at, j.AzimuthDeg[:n])
	t.round(colExtraterrestrial, at, j.ExtraterrestrialWm2[:n])
	t.round(colClearGlobal, at, j.ClearGlobalWm2[:n])
	t.round(colClearDirect, at, j.ClearDirectWm2[:n])
	t.round(colClearDiffuse, at, j.ClearDiffuseWm2[:n])
	t.round(colClearLWDown, at, j.ClearLWDownWm2[:n])
	for q := rules.Quantity(0); int(q) < rules.QuantityCount; q++ {
		if s := j.Primary(q); s != nil {
			t.series(q, at, n, s)
		}
	}
	t.secondAndBest(at, j)
	t.houseOut(at, j)
}

func (t *Table) series(q rules.Quantity, at, n int, s *engine.Series) {
	c := QuantityColumn(q)
	t.round(c+offValue, at, s.Value[:n])
	t.verdicts(c+offVerdict, at, s.Verdict[:n])
	t.reasons(c+offReasons, at, s.Missed[:n], s.Faults[:n], notesOf(s)[:n])
	if int(q) >= rules.RadiationCount {
		return
	}
	t.round(c+offMeasured, at, s.AsSent()[:n])
	t.round(c+offU95, at, s.U95[:n])
	t.round(c+offSD, at, s.SD[:n])
	t.round(c+offMin, at, s.Min[:n])
	t.round(c+offMax, at, s.Max[:n])
	counts, missed, passed := t.ints(c + offN)[at:at+n], t.ints(c + offMissed)[at:at+n], t.ints(c + offPassed)[at:at+n]
	for r := range n {
		counts[r], missed[r], passed[r] = int32(s.N[r]), int32(s.Missed[r]), int32(s.Passed[r])
	}
}

// notesOf is what people have noted of the series' minutes.
func notesOf(s *engine.Series) []rules.NoteSet {
	if s.Notes == nil {
		return make([]rules.NoteSet, len(s.Missed))
	}
	return s.Notes
}

var verdictDict = func() (d []string) {
	for v := rules.Verdict(0); v < rules.VerdictCount; v++ {
		d = append(d, v.String())
	}
	return d
}()

func (t *Table) ints(c int) []int32 {
	if t.Vectors[c].Ints == nil {
		t.Vectors[c].Ints = filled[int32](t.Rows, NullInt)
	}
	return t.Vectors[c].Ints
}

func (t *Table) codes(c int) []int32 {
	if t.Vectors[c].Codes == nil {
		t.Vectors[c].Codes = filled[int32](t.Rows, NullCode)
	}
	return t.Vectors[c].Codes
}

// round rounds values into a column; a column stays nil while there are no values for it.
func (t *Table) round(c, at int, values []float64) {
	step, inverse := minuteColumns[c].Step, 1/minuteColumns[c].Step
	out := t.Vectors[c].Doubles
	if out == nil {
		i := 0
		for i < len(values) && values[i] != values[i] {
			i++
		}
		if i == len(values) {
			return
		}
		out = filled(t.Rows, nan)
		t.Vectors[c].Doubles = out
	}
	out = out[at : at+len(values)]
	for i, x := range values {
		out[i] = roundFast(x, step, inverse)
	}
}

func (t *Table) reasons(c, at int, missed []rules.TestSet, faults []rules.FaultSet, notes []rules.NoteSet) {
	codes := t.codes(c)[at : at+len(missed)]
	v := &t.Vectors[c]
	known := map[[3]uint32]int32{}
	var last [3]uint32
	code := int32(-1)
	for r := range missed {
		key := [3]uint32{uint32(missed[r]), uint32(faults[r]), uint32(notes[r])}
		if code < 0 || key != last {
			var ok bool
			if code, ok = known[key]; !ok {
				code = v.code(Reasons(missed[r], faults[r], notes[r]))
				known[key] = code
			}
			last = key
		}
		codes[r] = code
	}
}

func (v *Vector) code(s string) int32 {
	for i, d := range v.Dict {
		if d == s {
			return int32(i)
		}
	}
	v.Dict = append(v.Dict, s)
	return int32(len(v.Dict) - 1)
}

// Reasons joins the tests missed, the kinds of the faults that reach a minute and the kinds of the notes about it, ';' between.
func Reasons(missed rules.TestSet, faults rules.FaultSet, notes rules.NoteSet) string {
	out := ""
	for _, x := range [...]string{missed.Join(";"), faults.Join(";"), notes.Join(";")} {
		if out != "" && x != "" {
			out += ";"
		}
		out += x
	}
	return out
}
