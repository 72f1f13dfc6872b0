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
	if c.rows == 0 {
		return nil, 0
	}
	seen := make([]bool, c.rows)
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
	straight      bool // both have the same minutes
	rows          int
	nothing       []float64
}

func (c *comparison) align() {
	x, y := c.before.Find("time").Times, c.after.Find("time").Times
	if c.straight = slices.Equal(x, y); c.straight {
		c.rows = len(x)
	} else {
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
		c.rows = len(c.b)
	}
	c.nothing = filled(c.rows, nan)
}

// paired gives the values of a column in the order of the pairs; nothing where it has none.
func paired[T any](c *comparison, values []T, rows []int, null T) []T {
	if values != nil && c.straight {
		return values
	}
	out := filled(c.rows, null)
	if values == nil {
		return out
	}
	for k, i := range rows {
		if i >= 0 {
			out[k] = values[i]
		}
	}
	return out
}

func (c *comparison) doubles(column int) (before, after []float64) {
	of := func(t *Table, rows []int) []float64 {
		v := t.Find(minuteColumns[column].Name)
		if v == nil || v.Doubles == nil {
			return c.nothing
		}
		return paired(c, v.Doubles, rows, nan)
	}
	return of(c.before, c.b), of(c.after, c.a)
}

func (c *comparison) ints(column int) (before, after []int32) {
	of := func(t *Table, rows []int) []int32 {
		v := t.Find(minuteColumns[column].Name)
		if v == nil {
			v = &Vector{}
		}
		return paired(c, v.Ints, rows, NullInt)
	}
	return of(c.before, c.b), of(c.after, c.a)
}

// texts gives a text column as codes of one dictionary; null and the empty text are the same, NullCode.
func (c *comparison) texts(column int) (before, after []int32, dict []string) {
	joint := &Vector{}
	of := func(t *Table, rows []int) []int32 {
		v := t.Find(minuteColumns[column].Name)
		if v == nil || v.Codes == nil {
			return filled[int32](c.rows, NullCode)
		}
		to := make([]int32, len(v.Dict))
		for d, text := range v.Dict {
			if to[d] = NullCode; text != "" {
				to[d] = joint.code(text)
			}
		}
		codes := make([]int32, len(v.Codes))
		for i, x := range v.Codes {
			if codes[i] = x; x != NullCode {
				codes[i] = to[x]
			}
		}
		return paired(c, codes, rows, NullCode)
	}
	before, after = of(c.before, c.b), of(c.after, c.a)
	return before, after, joint.Dict
}

func (c *comparison) quantity(q rules.Quantity) Change {
	out := Change{Quantity: q}
	first, width := QuantityColumn(q), radiationWidth
	if int(q) >= rules.RadiationCount {
		width = weatherWidth
	}
	codeB, codeA, dict := c.texts(first + offVerdict)
	verdicts := make([]rules.Verdict, len(dict)+1) // the first is for null
	verdicts[0] = rules.Absent
	for d, text := range dict {
		for v := rules.Verdict(0); v < rules.VerdictCount; v++ {
			if v.String() == text {
				verdicts[d+1] = v
			}
		}
	}
	valueB, valueA := c.doubles(first + offValue)
	details := make([]bool, c.rows)
	for i := first + offReasons; i < first+width; i++ {
		c.mark(details, i)
	}
	if int(q) < rules.RadiationCount {
		for i := range secondWidth {
			c.mark(details, SecondaryColumn(q)+i)
		}
		for i := range bestWidth {
			c.mark(details, BestColumn(q)+i)
		}
	}
	for k, xb := range valueB {
		xa := valueA[k]
		vb, va := verdicts[codeB[k]+1], verdicts[codeA[k]+1]
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

// mark notes the pairs that differ in a column.
func (c *comparison) mark(seen []bool, column int) {
	switch minuteColumns[column].Kind {
	case Double:
		b, a := c.doubles(column)
		if &b[0] == &a[0] { // neither has a value
			return
		}
		for k, x := range b {
			if y := a[k]; x != y && (x == x || y == y) {
				seen[k] = true
			}
		}
	case Int:
		b, a := c.ints(column)
		for k, x := range b {
			seen[k] = seen[k] || x != a[k]
		}
	case Text:
		b, a, _ := c.texts(column)
		for k, x := range b {
			seen[k] = seen[k] || x != a[k]
		}
	}
}
