package export

import (
	"io"
	"slices"
	"strconv"
	"strings"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/table"
)

// Dimensions of the files.
const (
	dimTime = iota
	dimBounds
	dimName
)

// A cfColumn is a column of the archive as a variable.
type cfColumn struct {
	table.Column
	codes map[string]int32 // of texts
}

// NetCDF writes the rows asked for in the classic form, by the conventions CF-1.8: one variable a column, named as in the archive, with units, standard
// names, cell methods, bounds of time, flag meanings, and the variables that belong to a quantity named in its ancillary_variables. Verdicts and
// other texts are flags. It gives the number of rows written.
func NetCDF(w io.Writer, a *store.Archive, r Request) (rows int, err error) {
	if err := r.Check(); err != nil {
		return 0, err
	}
	s, err := r.look(a)
	if err != nil {
		return 0, err
	}
	f := &ncFile{records: s.rows, attributes: r.globals(s)}
	station := r.Station
	f.dimensions = []ncDimension{{"time", 0}, {"nv", 2}, {"name_length", len(station)}}
	f.variables = append(f.place(s, station), r.timeVariables()...)
	columns := make([]cfColumn, 0, len(s.columns))
	names := []string{"time"}
	for _, c := range s.columns[1:] {
		x := cfColumn{Column: c}
		f.variables = append(f.variables, x.variable(&r, s))
		columns, names = append(columns, x), append(names, c.Name)
	}
	out, err := f.begin(w)
	if err != nil {
		return 0, err
	}
	err = r.each(a, names, func(rs *store.Rows) error { return r.writeRecords(out, rs, columns) })
	if err != nil {
		return out.written, err
	}
	return out.written, out.end()
}

// globals are the file's attributes, those that CF and ACDD 1.3 have a name for by that name.
func (r *Request) globals(s *survey) []ncAttribute {
	about := s.about()
	title := map[string]string{"minutes": "judged minutes", "raw": "readings as received", "clean-minute": "accepted minutes", "clean-hour": "means of hours",
		"clean-day": "means of days", "clean-month": "means of months"}[r.Product] + " of station " + r.Station
	list := []ncAttribute{{"Conventions", "CF-1.8, ACDD-1.3"}, {"title", title}, {"featureType", "timeSeries"}}
	add := func(name, value string) {
		if value != "" {
			list = append(list, ncAttribute{name, value})
		}
	}
	institution := about["network_name"]
	if institution == "" {
		institution = about["network"]
	}
	add("institution", institution)
	add("source", "surface radiation station, judged by "+about["program"]+", judge version "+about["judge_version"])
	add("license", about["licence"])
	add("acknowledgement", about["citation"])
	add("creator_name", about["contact"])
	add("processing_level", r.Product)
	add("references", about["gap_rules"])
	for _, k := range []string{"station", "rules_digest", "judge_version", "program", "calibrations", "night_negatives", "uncertainty_rules", "product_version", "format"} {
		add(k, about[k])
	}
	return list
}

// place are the variables that say where the station is.
func (f *ncFile) place(s *survey, station string) []ncVariable {
	name := ncVariable{name: "station_id", dimensions: []int{dimName}, kind: ncChar, data: []byte(station)}
	name.set("long_name", "station")
	name.set("cf_role", "timeseries_id")
	list := []ncVariable{name}
	for _, c := range [][4]string{{"lat", "latitude", "degrees_north", "latitude_deg"}, {"lon", "longitude", "degrees_east", "longitude_deg"},
		{"alt", "altitude", "m", "elevation_m"}} {
		x, err := strconv.ParseFloat(s.meta[c[3]], 64)
		if err != nil {
			continue // an archive without the rules that it was judged by
		}
		v := ncVariable{name: c[0], kind: ncDouble, data: doubleBytes(x)}
		v.set("standard_name", c[1])
		v.set("units", c[2])
		if c[0] == "alt" {
			v.set("positive", "up")
			v.set("axis", "Z")
		}
		list = append(list, v)
	}
	return list
}

const timeUnits = "seconds since 1970-01-01 00:00:00Z"

func (r *Request) timeVariables() []ncVariable {
	t := ncVariable{name: "time", dimensions: []int{dimTime}, kind: ncDouble}
	t.set("standard_name", "time")
	t.set("units", timeUnits)
	t.set("calendar", "standard")
	t.set("axis", "T")
	if lengthOf(r.Product, 0) == 0 {
		t.set("long_name", "stamp of the reading as sent, UTC")
		return []ncVariable{t}
	}
	t.set("long_name", "start of the period, UTC")
	t.set("bounds", "time_bnds")
	return []ncVariable{t, {name: "time_bnds", dimensions: []int{dimTime, dimBounds}, kind: ncDouble}}
}

// verdicts are the flags of a verdict: its number, and its word.
func verdicts() (values []int8, meanings string) {
	var words []string
	for v := rules.Verdict(0); v < rules.VerdictCount; v++ {
		values, words = append(values, int8(v)), append(words, v.String())
	}
	return values, strings.Join(words, " ")
}

// variable describes a column in CF's words.
func (c *cfColumn) variable(r *Request, s *survey) ncVariable {
	v := ncVariable{name: ncName(c.Name), dimensions: []int{dimTime}}
	v.set("standard_name", c.StandardName)
	v.set("long_name", c.Description)
	switch {
	case c.Kind == table.Text:
		c.flags(&v, s)
	case c.Kind == table.Bool:
		v.kind = ncByte
		v.set("flag_values", []int8{0, 1})
		v.set("flag_meanings", "no yes")
	case c.Kind == table.Int:
		v.kind = ncInt
		v.set("_FillValue", []int32{fillInt})
		if strings.HasSuffix(c.Name, "_tests_missed") || strings.HasSuffix(c.Name, "_tests_passed") {
			testFlags(&v)
		} else {
			v.set("units", "1")
		}
	case c.Kind == table.Time:
		v.kind = ncDouble
		v.set("_FillValue", []float64{fillDouble})
		v.set("units", timeUnits)
	default:
		v.kind = ncDouble
		v.set("_FillValue", []float64{fillDouble})
		v.set("units", c.Unit)
		v.set("cell_methods", c.cellMethods(r))
	}
	v.set("coordinates", coordinates(s))
	v.set("ancillary_variables", ancillary(c.Name, r, s))
	return v
}

func coordinates(s *survey) string {
	if s.meta["latitude_deg"] == "" {
		return "station_id"
	}
	return "lat lon alt station_id"
}

// ncName is a column's name as a variable's: a colon would have to be escaped in CDL.
func ncName(name string) string { return strings.ReplaceAll(name, ":", "_") }

// flags describes a column of texts as numbers with meanings.
func (c *cfColumn) flags(v *ncVariable, s *survey) {
	c.codes = map[string]int32{}
	if strings.HasSuffix(c.Name, "_verdict") {
		values, meanings := verdicts()
		for i, word := range strings.Fields(meanings) {
			c.codes[word] = int32(values[i])
		}
		v.kind = ncByte
		v.set("_FillValue", []int8{fillByte})
		v.set("flag_values", values)
		v.set("flag_meanings", meanings)
		return
	}
	var values []int32
	var words []string
	for i, text := range s.texts[c.Name] {
		c.codes[text] = int32(i)
		values, words = append(values, int32(i)), append(words, flagWord(text))
	}
	v.kind = ncInt
	v.set("_FillValue", []int32{fillInt})
	v.set("flag_values", values)
	v.set("flag_meanings", strings.Join(words, " "))
}

// flagWord writes a text as one word of CF's flag_meanings, which has letters, digits and _ - . + @ only.
func flagWord(text string) string {
	if text == "" {
		return "none"
	}
	return strings.Map(func(c rune) rune {
		switch {
		case c == ';':
			return '+'
		case c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= '0' && c <= '9' || strings.ContainsRune("_-.+@", c):
			return c
		}
		return '_'
	}, text)
}

func testFlags(v *ncVariable) {
	var masks []int32
	words := strings.Fields(table.TestBits())
	for i := range words {
		if i < 31 { // the highest bit of a signed number is its sign
			masks = append(masks, 1<<i)
		}
	}
	v.set("flag_masks", masks)
	v.set("flag_meanings", strings.Join(words[:len(masks)], " "))
}

// cellMethods says how a value stands for its period.
func (c *cfColumn) cellMethods(r *Request) string {
	switch {
	case r.Product == "raw":
		return ""
	case strings.HasSuffix(c.Name, "_sd"):
		return "time: standard_deviation"
	case strings.HasSuffix(c.Name, "_min"):
		return "time: minimum"
	case strings.HasSuffix(c.Name, "_max"):
		return "time: maximum"
	case strings.HasSuffix(c.Name, "_u95"):
		return ""
	case strings.HasSuffix(c.Name, "_deg"):
		return "time: point"
	}
	return "time: mean"
}

// ancillary lists the variables that belong to a quantity's value.
func ancillary(name string, r *Request, s *survey) string {
	names := r.names()
	if r.Product == "raw" || !slices.Contains(names, name) {
		return ""
	}
	var list []string
	for _, c := range s.columns {
		if c.Name != name && ofQuantity(c.Name, names) == name {
			list = append(list, ncName(c.Name))
		}
	}
	return strings.Join(list, " ")
}

func (r *Request) writeRecords(out *ncWriter, rs *store.Rows, columns []cfColumn) error {
	vectors := make([]*table.Vector, len(columns))
	codes := make([][]int32, len(columns))
	for i := range columns {
		if vectors[i] = rs.Find(columns[i].Name); vectors[i] == nil {
			vectors[i] = &table.Vector{}
		}
		for _, text := range vectors[i].Dict {
			codes[i] = append(codes[i], columns[i].codes[text])
		}
	}
	for k, at := range rs.Vectors[0].Times {
		start := float64(at) / 1e6
		out.double(start)
		if length := lengthOf(r.Product, at); length > 0 {
			out.double(start)
			out.double(float64(at+length) / 1e6)
		}
		for i := range columns {
			writeCell(out, &columns[i], vectors[i], codes[i], k)
		}
		if err := out.next(); err != nil {
			return err
		}
	}
	return nil
}

func writeCell(out *ncWriter, c *cfColumn, v *table.Vector, codes []int32, k int) {
	switch c.Kind {
	case table.Text:
		code := fillInt
		if v.Codes != nil && v.Codes[k] != table.NullCode {
			code = codes[v.Codes[k]]
		}
		if !strings.HasSuffix(c.Name, "_verdict") {
			out.int(code)
		} else if code == fillInt {
			out.byte(fillByte)
		} else {
			out.byte(int8(code))
		}
	case table.Bool:
		x := int8(0)
		if v.Bools != nil && v.Bools[k] {
			x = 1
		}
		out.byte(x)
	case table.Int:
		x := fillInt
		if v.Ints != nil {
			x = v.Ints[k] // a null has the same bits
		}
		out.int(x)
	case table.Time:
		if v.Times == nil || v.Times[k] == table.NullTime {
			out.double(fillDouble)
			return
		}
		out.double(float64(v.Times[k]) / float64(minute.MicrosPerMinute/60))
	default:
		if v.Doubles == nil {
			out.double(fillDouble)
			return
		}
		out.double(v.Doubles[k])
	}
}
