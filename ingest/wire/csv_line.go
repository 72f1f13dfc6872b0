package wire

import (
	"bytes"
	"fmt"
	"math"

	"fluxwarden/qc/minute"
)

var comma = []byte{','}

// parse reads a line into c.values.
func (c *CSV) parse(line []byte) (minute.Stamp, *LineRefusal) {
	if n := len(line); n > 0 && line[n-1] == '\r' {
		line = line[:n-1]
	}
	if bytes.IndexByte(line, '"') >= 0 {
		return c.parseQuoted(line)
	}
	at, column, value := blank, 0, 0
	for i := 0; ; column++ {
		if column == len(c.names) {
			return 0, c.fieldCount(column + 1 + bytes.Count(line[i:], comma))
		}
		if column != c.time {
			// The plain number is the common case, and is read without looking for the field's end first.
			v, end, syntax, finite := scanNumber(line, i, true)
			if syntax && finite && (end == len(line) || line[end] == ',') {
				c.values[value] = v
				value++
				if end == len(line) {
					column++
					break
				}
				i = end + 1
				continue
			}
		}
		end := len(line)
		if k := bytes.IndexByte(line[i:], ','); k >= 0 {
			end = i + k
		}
		field := line[i:end]
		if column == c.time {
			var ok bool
			if at, ok = ParseTime(field); !ok {
				if at, ok = ParseTime(bytes.TrimSpace(field)); !ok {
					return c.badTime(line, field)
				}
			}
		} else {
			v, ok := parseField(field)
			if !ok {
				if n := bytes.Count(line, comma) + 1; n != len(c.names) {
					return 0, c.fieldCount(n)
				}
				return 0, c.badNumber(column, field)
			}
			c.values[value] = v
			value++
		}
		if end == len(line) {
			column++
			break
		}
		i = end + 1
	}
	if column != len(c.names) {
		return c.short(line, column)
	}
	return at, nil
}

// short tells a blank line from one with too few fields.
func (c *CSV) short(line []byte, fields int) (minute.Stamp, *LineRefusal) {
	if len(bytes.TrimSpace(line)) == 0 {
		return blank, nil
	}
	return 0, c.fieldCount(fields)
}

func (c *CSV) badTime(line, field []byte) (minute.Stamp, *LineRefusal) {
	if len(bytes.TrimSpace(line)) == 0 {
		return blank, nil
	}
	// With a field too few or too many, what stands under the time is another column's: the count is what is wrong.
	if n := bytes.Count(line, comma) + 1; n != len(c.names) && bytes.IndexByte(line, '"') < 0 {
		return 0, c.fieldCount(n)
	}
	return 0, c.at(c.time+1, BadTime, fmt.Sprintf("time is %s: give RFC 3339 with a zone, such as 2026-06-21T12:00:01Z, between %d and %d",
		quote(field), YearMin, YearMax))
}

func (c *CSV) badNumber(column int, field []byte) *LineRefusal {
	return c.at(column+1, BadValue, fmt.Sprintf("%s is %s: give a finite number, or leave the field empty where there is none", c.names[column], quote(field)))
}

func (c *CSV) fieldCount(n int) *LineRefusal {
	return c.at(0, BadFields, fmt.Sprintf("%d fields, the header has %d: is a comma missing, or used as a decimal point?", n, len(c.names)))
}

// parseQuoted reads a line with a quote on it. A field cannot go on over a line's end.
func (c *CSV) parseQuoted(line []byte) (minute.Stamp, *LineRefusal) {
	var ok bool
	if c.fields, ok = splitFields(c.fields[:0], line); !ok {
		return 0, c.at(0, BadFields, "a quote is not closed on its line, or stands inside a field")
	}
	if len(c.fields) != len(c.names) {
		return 0, c.fieldCount(len(c.fields))
	}
	at, value := minute.Stamp(0), 0
	for i, field := range c.fields {
		if i == c.time {
			if at, ok = ParseTime(bytes.TrimSpace(field)); !ok {
				return c.badTime(line, field)
			}
			continue
		}
		if c.values[value], ok = parseField(field); !ok {
			return 0, c.badNumber(i, field)
		}
		value++
	}
	return at, nil
}

// parseField reads a number with spaces around it, or nothing as NaN, which in a batch says that there is no value.
func parseField(field []byte) (float64, bool) {
	field = bytes.TrimSpace(field)
	if len(field) == 0 {
		return math.NaN(), true
	}
	v, end, syntax, finite := scanNumber(field, 0, true)
	return v, syntax && finite && end == len(field)
}

// splitFields splits a line at its commas by RFC 4180: a field may stand in quotes, with its own quotes doubled.
func splitFields(into [][]byte, line []byte) ([][]byte, bool) {
	if n := len(line); n > 0 && line[n-1] == '\r' {
		line = line[:n-1]
	}
	for {
		if len(line) == 0 || line[0] != '"' {
			end := bytes.IndexByte(line, ',')
			field := line
			if end >= 0 {
				field = line[:end]
			}
			if bytes.IndexByte(field, '"') >= 0 {
				return into, false
			}
			into = append(into, field)
			if end < 0 {
				return into, true
			}
			line = line[end+1:]
			continue
		}
		field, rest, ok := unquoteField(line[1:])
		if !ok {
			return into, false
		}
		into = append(into, field)
		if len(rest) == 0 {
			return into, true
		}
		line = rest[1:]
	}
}

func unquoteField(b []byte) (field, rest []byte, ok bool) {
	doubled := false
	for i := 0; i < len(b); i++ {
		if b[i] != '"' {
			continue
		}
		if i+1 < len(b) && b[i+1] == '"' {
			doubled = true
			i++
			continue
		}
		field, rest = b[:i], b[i+1:]
		if doubled {
			field = bytes.ReplaceAll(field, []byte(`""`), []byte(`"`))
		}
		return field, rest, len(rest) == 0 || rest[0] == ','
	}
	return nil, nil, false
}
