package table

import (
	"fluxwarden/qc/engine"
	"fluxwarden/rules"
)

// This file holds the columns of a quantity's second instrument, `QUANTITY_secondary...`, and of its best value, `QUANTITY_best...`. They are
// null at a station that has no use for them.

// Offsets of the columns of a second instrument from its first, and of those of a best value.
const (
	offSecondMeasured = offReasons + 1 + iota
	offSecondU95
	offSecondSD
	secondWidth
)

const (
	offBestVerdict = 1 + iota
	offBestU95
	offBestSource
	bestWidth
)

// SecondaryColumn is the place of the value of the quantity's second instrument in MinuteColumns; its verdict and reasons follow.
func SecondaryColumn(q rules.Quantity) int { return secondaryFirst + int(q)*secondWidth }

// BestColumn is the place of the quantity's best value; its verdict, uncertainty and source follow.
func BestColumn(q rules.Quantity) int { return bestFirst + int(q)*bestWidth }

// Where the groups begin: listMinuteColumns sets them.
var secondaryFirst, bestFirst int

func appendSecondary(list []Column) []Column {
	secondaryFirst = len(list)
	for q := range rules.Quantity(rules.RadiationCount) {
		name, unit, long, step := q.String()+"_secondary", udunits[q.Unit()], "second instrument of "+q.String(), Step(q)
		double := func(suffix, what string, step float64) Column {
			return Column{Name: name + suffix, Unit: unit, Description: long + ": " + what, Kind: Double, Step: step}
		}
		value := double("", "mean of the minute after corrections", step)
		value.StandardName = standardNames[q]
		list = append(list, value,
			Column{Name: name + "_verdict", Description: long + ": accepted, questioned, rejected or absent", StandardName: "quality_flag", Kind: Text},
			Column{Name: name + "_reasons", Description: long + ": tests missed and faults that reach it, ';' between", Kind: Text},
			double("_measured", "mean of the minute before any correction", step),
			double("_u95", "expanded uncertainty, 95 %", StepSpread),
			double("_sd", "standard deviation of the samples", StepSpread))
	}
	return list
}

func appendBest(list []Column) []Column {
	bestFirst = len(list)
	for q := range rules.Quantity(rules.RadiationCount) {
		name, unit, long := q.String()+"_best", udunits[q.Unit()], "best "+q.String()
		list = append(list,
			Column{Name: name, Unit: unit, StandardName: standardNames[q], Kind: Double, Step: Step(q),
				Description: long + ": from what its source column says"},
			Column{Name: name + "_verdict", Description: long + ": accepted, questioned or absent", StandardName: "quality_flag", Kind: Text},
			Column{Name: name + "_u95", Unit: unit, Description: long + ": expanded uncertainty, 95 %", Kind: Double, Step: StepSpread},
			Column{Name: name + "_source", Description: long + ": primary, secondary, direct_and_diffuse or global_and_diffuse", Kind: Text})
	}
	return list
}

// secondAndBest writes the second instruments and the best values of a judged day from row `at` on.
func (t *Table) secondAndBest(at int, j *engine.Judged) {
	n := j.Rows
	for i := range j.Series {
		s := &j.Series[i]
		if !s.Secondary {
			continue
		}
		c := SecondaryColumn(s.Quantity)
		t.round(c+offValue, at, s.Value[:n])
		t.verdicts(c+offVerdict, at, s.Verdict[:n])
		t.reasons(c+offReasons, at, s.Missed[:n], s.Faults[:n], notesOf(s)[:n])
		t.round(c+offSecondMeasured, at, s.AsSent()[:n])
		t.round(c+offSecondU95, at, s.U95[:n])
		t.round(c+offSecondSD, at, s.SD[:n])
	}
	for i := range j.Best {
		b := &j.Best[i]
		c := BestColumn(b.Quantity)
		t.round(c, at, b.Value[:n])
		t.verdicts(c+offBestVerdict, at, b.Verdict[:n])
		t.round(c+offBestU95, at, b.U95[:n])
		sources := t.codes(c + offBestSource)[at : at+n]
		for r, s := range b.Source[:n] {
			if s != rules.NoSource {
				sources[r] = int32(s)
			}
		}
		t.Vectors[c+offBestSource].Dict = sourceDict
	}
}

// verdicts writes verdicts into a column.
func (t *Table) verdicts(c, at int, list []rules.Verdict) {
	codes := t.codes(c)[at : at+len(list)]
	for r, v := range list {
		codes[r] = int32(v)
	}
	t.Vectors[c].Dict = verdictDict
}

var sourceDict = func() (d []string) {
	for s := rules.Source(0); s < rules.SourceCount; s++ {
		d = append(d, s.String())
	}
	return d
}()
