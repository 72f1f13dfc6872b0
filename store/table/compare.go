package table

import (
	"math"
	"slices"

	"fluxwarden/rules"
)

// A Change is how the rows of one quantity differ between two revisions.
type Change struct {
	Quantity rules.Quantity
	Minutes  int // whose verdict or value differs
	Verdicts int // whose verdict differs
	Values   int // whose value differs, or is there in one only
	Details  int // where only reasons, uncertainty, spread or tests differ

	Moves [rules.VerdictCount][rules.VerdictCount]int // minutes by the verdict before and after

	Both    int     // minutes whose value is there in both and differs
	Sum     float64 // of after less before, over Both; in the quantity's unit
	Largest float64 // of after less before, the one furthest from nothing
}

// Mean is the mean of after less before over the minutes whose value differs; NaN without one.
func (c *Change) Mean() float64 { return c.Sum / float64(c.Both) }

// SumChanges adds changes of other rows to changes.
func SumChanges(to, more []Change) []Change {
	for _, m := range more {
		k := slices.IndexFunc(to, func(c Change) bool { return c.Quantity == m.Quantity })
		if k < 0 {
			to = append(to, m)
			continue
		}
		c := &to[k]
		c.Minutes, c.Verdicts, c.Values, c.Details = c.Minutes+m.Minutes, c.Verdicts+m.Verdicts, c.Values+m.Values, c.Details+m.Details
		for i := range c.Moves {
			for j := range c.Moves[i] {
				c.Moves[i][j] += m.Moves[i][j]
			}
		}
		c.Both, c.Sum = c.Both+m.Both, c.Sum+m.Sum
		if math.Abs(m.Largest) > math.Abs(c.Largest) {
			c.Largest = m.Largest
		}
	}
	slices.SortFunc(to, func(a, b Change) int { return int(a.Quantity) - int(b.Quantity) })
	return to
}

// Compare says how minutes sorted by time differ before and after, by quantity; a row that one of them lacks counts as absent. model is
// how many minutes differ in what belongs to no quantity. Quantities that do not differ are left out.
func Compare(before, after *Table) (changes []Change, model int) {
	c := comparison{before: before, after: after}
	c.align()
	seen := make([]bool, len(c.b))
	for i := colTime + 1; i < colQuantities; i++ {
		c.mark(seen, i)
	}
	for _, s := range seen {
		if s {
			model++
		}
	}
	for q := rules.Quantity(0); int(q) < rules.QuantityCount; q++ {
		if change := c.quantity(q); change.Minutes+change.Details > 0 {
			changes = append(changes, change)
		}
	}
	return changes, model
}

// A comparison pairs rows: row k of the one is b[k] before and a[k] after, -1 where it is not there.
type comparison struct {
	before, after *Table
	b, a          []int
}

func (c *comparison) align() {
	x, y := c.before.Find("time").Times, c.after.Find("time").Times
	c.b, c.a = make([]int, 0, len(y)), make([]int, 0, len(y))
	for i, k := 0, 0; i < len(x) || k < len(y); {
		switch {
		case k == len(y) || i < len(x) && x[i] < y[k]:
			c.b, c.a = append(c.b, i), append(c.a, -1)
			i++
		case i == len(x) || y[k] < x[i]:
			c.b, c.a = append(c.b, -1), append(c.a, k)
			k++
		default:
			c.b, c.a = append(c.b, i), append(c.a, k)
			i, k = i+1, k+1
		}
	}
}

func (c *comparison) quantity(q rules.Quantity) Change {
	out := Change{Quantity: q}
	first, width := QuantityColumn(q), radiationWidth
	if int(q) >= rules.RadiationCount {
		width = weatherWidth
	}
	verdict := c.verdicts(first + offVerdict)
	value := c.doubles(first + offValue)
	details := make([]bool, len(c.b))
	for i := first + offReasons; i < first+width; i++ {
		c.mark(details, i)
	}
	for k := range c.b {
		vb, va := verdict(k)
		xb, xa := value(k)
		other, moved := vb != va, xb != xa && (xb == xb || xa == xa)
		switch {
		case other || moved:
			out.Minutes++
		case details[k]:
			out.Details++
		}
		if other {
			out.Verdicts++
			out.Moves[vb][va]++
		}
		if !moved {
			continue
		}
		out.Values++
		if by := xa - xb; by == by {
			out.Both++
			out.Sum += by
			if math.Abs(by) > math.Abs(out.Largest) {
				out.Largest = by
			}
		}
	}
	return out
}

// verdicts gives the two verdicts of a pair.
func (c *comparison) verdicts(column int) func(k int) (before, after rules.Verdict) {
	of := func(t *Table) func(i int) rules.Verdict {
		v := t.Find(minuteColumns[column].Name)
		if v == nil || v.Codes == nil {
			return func(int) rules.Verdict { return rules.Absent }
		}
		known := make([]rules.Verdict, len(v.Dict))
		for d, text := range v.Dict {
			for x := rules.Verdict(0); x < rules.VerdictCount; x++ {
				if x.String() == text {
					known[d] = x
				}
			}
		}
		return func(i int) rules.Verdict {
			if i < 0 || v.Codes[i] == NullCode {
				return rules.Absent
			}
			return known[v.Codes[i]]
		}
	}
	b, a := of(c.before), of(c.after)
	return func(k int) (rules.Verdict, rules.Verdict) { return b(c.b[k]), a(c.a[k]) }
}

func (c *comparison) doubles(column int) func(k int) (before, after float64) {
	of := func(t *Table) func(i int) float64 {
		v := t.Find(minuteColumns[column].Name)
		if v == nil || v.Doubles == nil {
			return func(int) float64 { return nan }
		}
		return func(i int) float64 {
			if i < 0 {
				return nan
			}
			return v.Doubles[i]
		}
	}
	b, a := of(c.before), of(c.after)
	return func(k int) (float64, float64) { return b(c.b[k]), a(c.a[k]) }
}

// mark notes the pairs that differ in a column.
func (c *comparison) mark(seen []bool, column int) {
	name := minuteColumns[column].Name
	b, a := c.before.Find(name), c.after.Find(name)
	switch minuteColumns[column].Kind {
	case Double:
		value := c.doubles(column)
		for k := range seen {
			if x, y := value(k); x != y && (x == x || y == y) {
				seen[k] = true
			}
		}
	case Int:
		of := func(v *Vector, i int) int32 {
			if v == nil || v.Ints == nil || i < 0 {
				return NullInt
			}
			return v.Ints[i]
		}
		for k := range seen {
			seen[k] = seen[k] || of(b, c.b[k]) != of(a, c.a[k])
		}
	case Text:
		of := func(v *Vector, i int) string {
			if v == nil || v.Codes == nil || i < 0 || v.Codes[i] == NullCode {
				return ""
			}
			return v.Dict[v.Codes[i]]
		}
		for k := range seen {
			seen[k] = seen[k] || of(b, c.b[k]) != of(a, c.a[k])
		}
	}
}
