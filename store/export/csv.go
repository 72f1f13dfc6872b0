// Package export writes what the archive holds in the forms that others read.
package export

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"time"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/table"
)

// CSV writes the rows asked for as CSV. Of minutes: `time` (RFC 3339, the minute's start), then for each quantity q of the station q, q_verdict,
// q_reasons, q_measured and, of radiation, q_u95, then further columns, among them those of a second instrument and of a best value where the minutes
// have them. Weather is not corrected, so its q_measured is q. Of other products: `time`, then
// every column that has a value. A value that is not there is empty. It gives the number of rows written.
func CSV(w io.Writer, a *store.Archive, r Request) (rows int, err error) {
	if err := r.Check(); err != nil {
		return 0, err
	}
	var columns []csvColumn
	if r.Product == "minutes" {
		columns, err = r.csvOfMinutes(a)
	} else {
		columns, err = r.csvOfProduct(a)
	}
	if err != nil {
		return 0, err
	}
	var names []string
	for _, c := range columns {
		names = append(names, c.source)
	}
	out := bufio.NewWriterSize(w, 1<<18)
	line := []byte("time")
	for _, c := range columns {
		line = append(append(line, ','), c.header...)
	}
	if _, err := out.Write(append(line, '\n')); err != nil {
		return 0, err
	}
	err = r.each(a, names, func(rs *store.Rows) error {
		rows += rs.Rows
		return writeRows(out, rs, columns)
	})
	if err != nil {
		return rows, err
	}
	return rows, out.Flush()
}

func (r *Request) csvOfMinutes(a *store.Archive) ([]csvColumn, error) {
	quantities, err := quantitiesOf(a, r)
	if err != nil {
		return nil, err
	}
	second, _, err := withVerdict(a, r, quantities, "_secondary")
	if err != nil {
		return nil, err
	}
	best, _, err := withVerdict(a, r, quantities, "_best")
	if err != nil {
		return nil, err
	}
	return csvColumns(quantities, second, best), nil
}

func (r *Request) csvOfProduct(a *store.Archive) ([]csvColumn, error) {
	s, err := r.look(a)
	if err != nil {
		return nil, err
	}
	var columns []csvColumn
	for _, c := range s.columns[1:] {
		columns = append(columns, csvColumn{c.Name, c.Name, decimals(c.Step), c.Kind})
	}
	return columns, nil
}

// quantitiesOf finds the quantities that have a verdict in the minutes asked for.
func quantitiesOf(a *store.Archive, r *Request) ([]rules.Quantity, error) {
	var asked []rules.Quantity
	for q := rules.Quantity(0); int(q) < rules.QuantityCount; q++ {
		if r.Quantities == nil || slices.Contains(r.Quantities, q.String()) {
			asked = append(asked, q)
		}
	}
	has, rows, err := withVerdict(a, r, asked, "")
	if err == nil && rows == 0 {
		err = r.nothing(a)
	}
	var list []rules.Quantity
	for i, q := range asked {
		if has[i] {
			list = append(list, q)
		} else if r.Quantities != nil && err == nil {
			err = fmt.Errorf("station %s: no %s in this range: it has no instrument that measures it", r.Station, q)
		}
	}
	return list, err
}

// withVerdict says for which of the quantities the minutes asked for have a verdict in the columns of a suffix, and how many minutes there are.
func withVerdict(a *store.Archive, r *Request, asked []rules.Quantity, suffix string) (has []bool, rows int, err error) {
	names := []string{"time"}
	for _, q := range asked {
		names = append(names, q.String()+suffix+"_verdict")
	}
	has = make([]bool, len(asked))
	err = r.each(a, names, func(rs *store.Rows) error {
		rows += rs.Rows
		for i, n := range names[1:] {
			if v := rs.Find(n); v != nil && !has[i] {
				has[i] = hasValue(v)
			}
		}
		return nil
	})
	return has, rows, err
}

type csvColumn struct {
	header, source string
	decimals       int
	kind           table.Kind
}

// csvColumns lists the columns of the quantities; second and best say which of them have a second instrument and a best value.
func csvColumns(quantities []rules.Quantity, second, best []bool) []csvColumn {
	var first, more []csvColumn
	all := table.MinuteColumns()
	find := func(name string) (csvColumn, bool) {
		for _, c := range all {
			if c.Name == name {
				return csvColumn{name, name, decimals(c.Step), c.Kind}, true
			}
		}
		return csvColumn{}, false
	}
	for _, q := range quantities {
		for _, suffix := range []string{"", "_verdict", "_reasons", "_measured", "_u95"} {
			c, ok := find(q.String() + suffix)
			if !ok && suffix == "_measured" {
				c, _ = find(q.String())
				c.header = q.String() + suffix
			} else if !ok {
				continue // weather has no uncertainty yet
			}
			first = append(first, c)
		}
		for _, suffix := range []string{"_sd", "_min", "_max", "_n"} {
			if c, ok := find(q.String() + suffix); ok {
				more = append(more, c)
			}
		}
	}
	group := func(q rules.Quantity, has bool, suffixes ...string) {
		for _, suffix := range suffixes {
			if c, ok := find(q.String() + suffix); ok && has {
				more = append(more, c)
			}
		}
	}
	for i, q := range quantities {
		group(q, best[i], "_best", "_best_verdict", "_best_u95", "_best_source")
		group(q, second[i], "_secondary", "_secondary_verdict", "_secondary_reasons", "_secondary_measured", "_secondary_u95")
	}
	for _, name := range []string{"records", "zenith_deg", "apparent_zenith_deg", "azimuth_deg", "extraterrestrial", "clear_global", "clear_direct",
		"clear_diffuse", "clear_lw_down"} {
		if c, ok := find(name); ok {
			more = append(more, c)
		}
	}
	return append(first, more...)
}

// allDigits stands for a number that is written with as many digits as tell it from others.
const allDigits = -1

// decimals are those that a resolution deserves.
func decimals(step float64) int {
	switch {
	case step == 0:
		return allDigits
	case step >= table.StepPressure:
		return 1
	case step > table.StepAngle:
		return 2
	case step > table.StepRatio:
		return 3
	}
	return 4
}

func writeRows(out *bufio.Writer, rs *store.Rows, columns []csvColumn) error {
	vectors := make([]*table.Vector, len(columns))
	for i, c := range columns {
		if v := rs.Find(c.source); v != nil && c.source != "" {
			vectors[i] = v
		} else {
			vectors[i] = &table.Vector{}
		}
	}
	day, date := int64(math.MinInt64), ""
	line := make([]byte, 0, 1024)
	for r, x := range rs.Vectors[0].Times {
		m := minute.FloorDiv(x, minute.MicrosPerMinute)
		if x%minute.MicrosPerMinute != 0 { // a reading's stamp
			line = time.UnixMicro(x).UTC().AppendFormat(line[:0], time.RFC3339Nano)
		} else {
			if d := minute.FloorDiv(m, minute.PerDay); d != day {
				day, date = d, time.Unix(d*86400, 0).UTC().Format("2006-01-02T")
			}
			of := m - day*minute.PerDay
			line = append(line[:0], date...)
			line = append(line, byte('0'+of/600), byte('0'+of/60%10), ':', byte('0'+of%60/10), byte('0'+of%10), ':', '0', '0', 'Z')
		}
		for i := range columns {
			line = appendCell(append(line, ','), &columns[i], vectors[i], r)
		}
		if _, err := out.Write(append(line, '\n')); err != nil {
			return fmt.Errorf("export: %w", err)
		}
	}
	return nil
}

func appendCell(b []byte, c *csvColumn, v *table.Vector, r int) []byte {
	switch {
	case v.Doubles != nil:
		return appendFixed(b, v.Doubles[r], c.decimals)
	case v.Times != nil && v.Times[r] != table.NullTime:
		return time.UnixMicro(v.Times[r]).UTC().AppendFormat(b, time.RFC3339Nano)
	case v.Bools != nil:
		return strconv.AppendBool(b, v.Bools[r])
	case v.Ints != nil && v.Ints[r] != table.NullInt:
		return strconv.AppendInt(b, int64(v.Ints[r]), 10)
	case v.Codes != nil && v.Codes[r] != table.NullCode:
		return append(b, v.Dict[v.Codes[r]]...)
	}
	return b
}

// appendFixed writes a number with so many decimals, and nothing for NaN.
func appendFixed(b []byte, x float64, decimals int) []byte {
	if math.IsNaN(x) {
		return b
	}
	if decimals == allDigits {
		return strconv.AppendFloat(b, x, 'g', -1, 64)
	}
	scale := [...]float64{1, 10, 100, 1000, 10_000}[decimals]
	k := math.RoundToEven(x * scale)
	if math.Abs(k) > 1<<52 {
		return strconv.AppendFloat(b, x, 'g', -1, 64)
	}
	n := int64(k)
	if n < 0 {
		b = append(b, '-')
		n = -n
	}
	b = strconv.AppendInt(b, n/int64(scale), 10)
	if decimals == 0 {
		return b
	}
	rest := strconv.AppendInt(make([]byte, 0, 8), n%int64(scale)+int64(scale), 10) // a 1 in front keeps the zeros
	return append(append(b, '.'), rest[1:]...)
}
