package table

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"math"
)

var nan = math.NaN()

func roundFast(x, step, inverse float64) float64 {
	if !(math.Abs(x) < 1<<40) { // also NaN
		return Round(x, step)
	}
	return math.RoundToEven(x*inverse)*step + 0
}

// Digest is the row digest of rows from `from` to `to`, sha256 over their canonical form, in hex. The form depends on the rows alone:
// the times, then for each column in MinuteColumns' order that has a value the name, a bit a row for what is not null, and the values:
// numbers as multiples of the column's step in 4 bytes if all fit, else as doubles; texts with their length before. A column that is
// added to the list later and is null in old rows changes no digest. All numbers are little-endian.
func Digest(t *Table, from, to int) string { return DigestOf(minuteColumns, t, from, to) }

// DigestOf is the same over other columns, of which the first is the time.
func DigestOf(columns []Column, t *Table, from, to int) string {
	h := sha256.New()
	b := make([]byte, 0, 8*(to-from)+256)
	b = append(b, "fluxwarden rows 1\n"...)
	b = binary.LittleEndian.AppendUint32(b, uint32(to-from))
	for _, x := range t.Vectors[0].Times[from:to] {
		b = binary.LittleEndian.AppendUint64(b, uint64(x))
	}
	h.Write(b)
	for i := range columns {
		c := &columns[i]
		if c.Kind == Time {
			continue
		}
		v := t.Find(c.Name)
		if v == nil {
			continue
		}
		if b = canonical(b[:0], c, v, from, to); len(b) > 0 {
			h.Write(b)
		}
	}
	return hex.EncodeToString(h.Sum(nil))
}

func canonical(b []byte, c *Column, v *Vector, from, to int) []byte {
	b = append(b, c.Name...)
	b = append(b, 0)
	bits := len(b)
	b = append(b, make([]byte, (to-from+7)/8)...)
	start := len(b)
	switch {
	case v.Doubles != nil:
		b = canonicalDoubles(b, bits, v.Doubles[from:to], c.Step)
	case v.Ints != nil:
		for r, x := range v.Ints[from:to] {
			if x != NullInt {
				b[bits+r/8] |= 1 << (r % 8)
				b = binary.LittleEndian.AppendUint32(b, uint32(x))
			}
		}
	case v.Codes != nil:
		for r, x := range v.Codes[from:to] {
			if x != NullCode {
				b[bits+r/8] |= 1 << (r % 8)
				b = binary.AppendUvarint(b, uint64(len(v.Dict[x])))
				b = append(b, v.Dict[x]...)
			}
		}
	}
	if len(b) == start {
		return b[:0]
	}
	return b
}

func canonicalDoubles(b []byte, bits int, values []float64, step float64) []byte {
	start, inverse := len(b), 1/step
	b = append(b, 'i')
	for r, x := range values {
		if x != x {
			continue
		}
		k := x * inverse
		if !(math.Abs(k) < 1<<31) || math.Trunc(k) != k {
			return canonicalBits(b[:start], bits, values)
		}
		b[bits+r/8] |= 1 << (r % 8)
		b = binary.LittleEndian.AppendUint32(b, uint32(int32(k)))
	}
	if len(b) == start+1 {
		return b[:start]
	}
	return b
}

func canonicalBits(b []byte, bits int, values []float64) []byte {
	b = append(b, 'd')
	for r, x := range values {
		if x == x {
			b[bits+r/8] |= 1 << (r % 8)
			b = binary.LittleEndian.AppendUint64(b, math.Float64bits(x))
		}
	}
	return b
}
