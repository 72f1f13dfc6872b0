package table

import "math"

// A Part is rows From to To of a table.
type Part struct {
	Table    *Table
	From, To int
}

// Cut gives rows from to to, sharing the values.
func (t *Table) Cut(from, to int) *Table {
	out := &Table{Columns: t.Columns, Vectors: make([]Vector, len(t.Vectors)), Rows: to - from, Meta: t.Meta}
	for i := range t.Vectors {
		v, o := &t.Vectors[i], &out.Vectors[i]
		o.Dict = v.Dict
		if v.Times != nil {
			o.Times = v.Times[from:to]
		}
		if v.Doubles != nil {
			o.Doubles = v.Doubles[from:to]
		}
		if v.Ints != nil {
			o.Ints = v.Ints[from:to]
		}
		if v.Codes != nil {
			o.Codes = v.Codes[from:to]
		}
		if v.Bools != nil {
			o.Bools = v.Bools[from:to]
		}
	}
	return out
}

// Join puts parts behind one another. It has these columns; a part that lacks one has nulls there.
func Join(columns []Column, parts []Part) *Table {
	t := &Table{Columns: columns, Vectors: make([]Vector, len(columns))}
	for _, p := range parts {
		t.Rows += p.To - p.From
	}
	for i := range columns {
		at := 0
		for _, p := range parts {
			if v := p.Table.Find(columns[i].Name); v != nil {
				t.Vectors[i].paste(v, columns[i].Kind, p, at, t.Rows)
			}
			at += p.To - p.From
		}
	}
	return t
}

func (o *Vector) paste(v *Vector, kind Kind, p Part, at, rows int) {
	switch {
	case kind == Time && v.Times != nil:
		if o.Times == nil {
			o.Times = filled[int64](rows, math.MinInt64)
		}
		copy(o.Times[at:], v.Times[p.From:p.To])
	case kind == Double && v.Doubles != nil:
		if o.Doubles == nil {
			o.Doubles = filled(rows, nan)
		}
		copy(o.Doubles[at:], v.Doubles[p.From:p.To])
	case kind == Int && v.Ints != nil:
		if o.Ints == nil {
			o.Ints = filled[int32](rows, NullInt)
		}
		copy(o.Ints[at:], v.Ints[p.From:p.To])
	case kind == Bool && v.Bools != nil:
		if o.Bools == nil {
			o.Bools = make([]bool, rows)
		}
		copy(o.Bools[at:], v.Bools[p.From:p.To])
	case kind == Text && v.Codes != nil:
		if o.Codes == nil {
			o.Codes = filled[int32](rows, NullCode)
		}
		to := make([]int32, len(v.Dict))
		for i, s := range v.Dict {
			to[i] = o.code(s)
		}
		for r, x := range v.Codes[p.From:p.To] {
			if x != NullCode {
				o.Codes[at+r] = to[x]
			}
		}
	}
}

// Union is the columns of all tables, the first ones first.
func Union(tables []*Table) []Column {
	var list []Column
	seen := map[string]bool{}
	for _, t := range tables {
		for _, c := range t.Columns {
			if !seen[c.Name] {
				seen[c.Name] = true
				list = append(list, c)
			}
		}
	}
	return list
}

// Pick gives the columns that are wanted, sharing the values.
func (t *Table) Pick(wanted func(c *Column) bool) *Table {
	out := &Table{Rows: t.Rows, Meta: t.Meta}
	for i := range t.Columns {
		if wanted(&t.Columns[i]) {
			out.Columns, out.Vectors = append(out.Columns, t.Columns[i]), append(out.Vectors, t.Vectors[i])
		}
	}
	return out
}
