package field

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"

	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// fileLineMax bounds one line of a followed file.
const fileLineMax = 64 << 10

// A lineReader takes the lines of one file in order: header first, then records. Its state is the header's columns and how many lines
// have gone by, so that it can go on in the middle of a file.
type lineReader struct {
	layout *rules.FileLayout
	lines  int // gone by
	Header []string
	time   []int // columns from 0
	values []int // of the layout's channels
	least  int   // columns that a record must have
	fields [][]byte
}

func newLineReader(l *rules.FileLayout) *lineReader {
	r := &lineReader{layout: l}
	if !l.Header {
		_ = r.place(nil) // numbers only: the site file was held to that
	}
	return r
}

// resume goes on behind some lines of a file whose header was this.
func (r *lineReader) resume(lines int, header []string) error {
	r.lines = lines
	if r.layout.Header && lines > r.layout.Skip {
		r.Header = header
		return r.place(header)
	}
	return nil
}

// place finds the columns.
func (r *lineReader) place(header []string) error {
	find := func(c rules.Column) (int, error) {
		if c.Number > 0 {
			return c.Number - 1, nil
		}
		for i, name := range header {
			if name == c.Name {
				return i, nil
			}
		}
		return 0, fmt.Errorf("no column %q in the header: it has %.200s", c.Name, strings.Join(header, ", "))
	}
	r.time, r.values, r.least = r.time[:0], r.values[:0], 0
	for _, c := range r.layout.Time {
		i, err := find(c)
		if err != nil {
			return err
		}
		r.time, r.least = append(r.time, i), max(r.least, i+1)
	}
	for _, c := range r.layout.Channels {
		i, err := find(c.Column)
		if err != nil {
			return err
		}
		r.values, r.least = append(r.values, i), max(r.least, i+1)
	}
	return nil
}

// errHeader is wrapped by what is wrong with a file's header: nothing of the file can be read then.
var errHeader = errors.New("header")

// take reads one line without its end. Of a record it gives a reading or a refusal; of other lines neither.
func (r *lineReader) take(line []byte) (reading *minute.Reading, refusal *wire.Refusal, err error) {
	l := r.layout
	line = bytes.TrimSuffix(line, []byte{'\r'})
	if r.lines == 0 {
		line = bytes.TrimPrefix(line, []byte("\ufeff"))
	}
	r.lines++
	first := l.Skip + l.AfterHeader + 1
	if l.Header {
		first++
	}
	switch {
	case r.lines <= l.Skip:
		return nil, nil, nil
	case l.Header && r.lines == l.Skip+1:
		fields, ok := r.split(line)
		if !ok {
			return nil, nil, fmt.Errorf("%w: line %d: a quote is not closed", errHeader, r.lines)
		}
		r.Header = nil
		for _, f := range fields {
			r.Header = append(r.Header, string(bytes.TrimSpace(f)))
		}
		if err := r.place(r.Header); err != nil {
			return nil, nil, fmt.Errorf("%w: line %d: %w", errHeader, r.lines, err)
		}
		return nil, nil, nil
	case r.lines < first || len(bytes.TrimSpace(line)) == 0:
		return nil, nil, nil
	}
	reading, refusal = r.record(line)
	return reading, refusal, nil
}

func refuse(reason wire.Reason, format string, args ...any) *wire.Refusal {
	return &wire.Refusal{Reason: reason, Detail: fmt.Sprintf(format, args...), Index: wire.Whole}
}

func (r *lineReader) record(line []byte) (*minute.Reading, *wire.Refusal) {
	if len(line) > fileLineMax {
		return nil, refuse(wire.LineTooLong, "longer than %d bytes", fileLineMax)
	}
	fields, ok := r.split(line)
	switch {
	case !ok:
		return nil, refuse(wire.BadFields, "a quote is not closed")
	case len(fields) < r.least:
		return nil, refuse(wire.BadFields, "%d fields, at least %d are needed", len(fields), r.least)
	case r.Header != nil && len(fields) > len(r.Header):
		return nil, refuse(wire.BadFields, "%d fields, the header has %d", len(fields), len(r.Header))
	}
	var text []byte
	for i, c := range r.time {
		if i > 0 {
			text = append(text, ' ')
		}
		text = append(text, bytes.TrimSpace(fields[c])...)
	}
	at, err := r.layout.Stamp.Parse(string(text), r.layout.Zone)
	if err != nil || at.Year() < wire.YearMin || at.Year() > wire.YearMax {
		return nil, refuse(wire.BadTime, "%.40q is not a time of the form %s", text, r.layout.Stamp)
	}
	reading := &minute.Reading{At: minute.Stamp(at.UnixMicro())}
	for i, c := range r.values {
		v, given, ok := r.number(bytes.TrimSpace(fields[c]))
		if !ok {
			return nil, refuse(wire.BadValue, "column %s: %.40q is not a number; a mark for no value belongs into missing", r.layout.Channels[i].Column, fields[c])
		}
		if given {
			reading.Values = append(reading.Values, minute.ChannelValue{Channel: r.layout.Channels[i].Channel, Value: minute.Single(v)})
		}
	}
	return reading, nil
}

// number reads a field; given is false where it stands for no value.
func (r *lineReader) number(field []byte) (v float64, given, ok bool) {
	text := string(field)
	if text == "" || strings.EqualFold(text, "nan") {
		return 0, false, true
	}
	for _, m := range r.layout.Missing {
		if text == m {
			return 0, false, true
		}
	}
	if r.layout.DecimalComma {
		if strings.Contains(text, ".") {
			return 0, false, false
		}
		text = strings.Replace(text, ",", ".", 1)
	}
	if strings.ContainsAny(text, "xXpP_iI") {
		return 0, false, false
	}
	v, err := strconv.ParseFloat(text, 64)
	if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
		return 0, false, false
	}
	for _, m := range r.layout.Missing { // -9999 stands for -9999.00 too
		if mark, err := strconv.ParseFloat(m, 64); err == nil && mark == v {
			return 0, false, true
		}
	}
	return v, true, true
}

// split cuts a line into fields. A field in double quotes may hold the delimiter, and a quote written twice.
func (r *lineReader) split(line []byte) ([][]byte, bool) {
	r.fields = r.fields[:0]
	d := r.layout.Delimiter
	blank := func(c byte) bool { return c == ' ' || c == '\t' }
	for i := 0; ; {
		if d == ' ' {
			for i < len(line) && blank(line[i]) {
				i++
			}
			if i == len(line) {
				return r.fields, true
			}
		}
		start := i
		for d != ' ' && d != '\t' && i < len(line) && line[i] == ' ' {
			i++
		}
		if i < len(line) && line[i] == '"' {
			field, end, ok := quoted(line, i)
			if !ok {
				return nil, false
			}
			for i = end; i < len(line) && line[i] == ' ' && d != ' '; i++ {
			}
			if i < len(line) && line[i] != d && !(d == ' ' && blank(line[i])) {
				return nil, false
			}
			r.fields = append(r.fields, field)
		} else {
			for i = start; i < len(line) && line[i] != d && !(d == ' ' && blank(line[i])); i++ {
			}
			r.fields = append(r.fields, line[start:i])
		}
		if i >= len(line) {
			return r.fields, true
		}
		i++
	}
}

func quoted(line []byte, i int) (field []byte, end int, ok bool) {
	for i++; i < len(line); i++ {
		if line[i] != '"' {
			field = append(field, line[i])
			continue
		}
		if i+1 < len(line) && line[i+1] == '"' {
			field = append(field, '"')
			i++
			continue
		}
		return field, i + 1, true
	}
	return nil, 0, false
}
