package table

import "encoding/binary"

// levelsFor writes the definition levels of a column's rows, a bit a row, and counts the nulls. A column that is never null has no levels.
func (w *Writer) levelsFor(c *Column, v *Vector, from, to int, nulls *int) []byte {
	n := to - from
	bits := make([]byte, (n+7)/8)
	count := 0
	mark := func(i int) { bits[i/8] |= 1 << (i % 8); count++ }
	switch {
	case c.Kind == Double && v.Doubles != nil:
		for i, x := range v.Doubles[from:to] {
			if isValue(x) {
				bits[i>>3] |= 1 << (i & 7)
				count++
			}
		}
	case c.Kind == Int && v.Ints != nil:
		for i, x := range v.Ints[from:to] {
			if x != NullInt {
				mark(i)
			}
		}
	case c.Kind == Time && v.Times != nil:
		for i, x := range v.Times[from:to] {
			if x != NullTime {
				mark(i)
			}
		}
	case c.Kind == Text && v.Codes != nil:
		for i, x := range v.Codes[from:to] {
			if x != NullCode {
				mark(i)
			}
		}
	case c.Kind == Bool && v.Bools != nil:
		count = n
	}
	*nulls = n - count
	if c.Required {
		return nil
	}
	// The hybrid of runs and packed bits, with its length before: one run if all rows are alike, else all packed.
	b := make([]byte, 4, 16+len(bits))
	switch count {
	case 0:
		b = append(binary.AppendUvarint(b, uint64(n)<<1), 0)
	case n:
		b = append(binary.AppendUvarint(b, uint64(n)<<1), 1)
	default:
		b = append(binary.AppendUvarint(b, uint64(len(bits))<<1|1), bits...)
	}
	binary.LittleEndian.PutUint32(b, uint32(len(b)-4))
	return b
}
