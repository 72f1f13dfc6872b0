package rules

import (
	"fmt"
	"math"
	"net/url"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"time"
)

// A FileLayout says where a logger's files lie and how they are read.
type FileLayout struct {
	Path         string // a file or a pattern of path/filepath.Match
	Delimiter    byte   // ' ' stands for any number of blanks
	Skip         int    // lines before the header
	Header       bool   // the next line names the columns
	AfterHeader  int    // lines between header and first record
	Time         []Column
	Stamp        *TimePattern
	Zone         *time.Location // fixed; nil where the time carries its own
	DecimalComma bool
	Missing      []string
	Channels     []FileChannel // sorted by name
	Line         int
}

// A Column is a column of a file, by name or by number.
type Column struct {
	Name   string
	Number int // from 1; 0 where the name counts
}

func (c Column) String() string {
	if c.Number > 0 {
		return strconv.Itoa(c.Number)
	}
	return c.Name
}

// A FileChannel is a column that is read into a channel.
type FileChannel struct {
	Channel string
	Column  Column
}

// A ModbusDevice is asked for its registers.
type ModbusDevice struct {
	URL      string // tcp://, rtu:// or rtuovertcp://
	Device   uint8
	Baud     uint
	Parity   string // none, even, odd
	StopBits uint
	Every    time.Duration // whole seconds
	Timeout  time.Duration
	Values   []ModbusValue // sorted by table and address
	Line     int
}

// A ModbusValue is one number in a device's registers.
type ModbusValue struct {
	Channel       string
	Address       uint16
	Input         bool   // function 4 instead of 3
	Type          string // uint16 ... float64
	LowFirst      bool   // order of the 16-bit words
	Scale, Offset float64
	Missing       float64 // NaN where there is no such mark
}

// Registers is how many 16-bit registers the number takes.
func (v *ModbusValue) Registers() int {
	switch {
	case strings.HasSuffix(v.Type, "64"):
		return 4
	case strings.HasSuffix(v.Type, "32"):
		return 2
	}
	return 1
}

func columnOf(text string) Column {
	if n, err := strconv.Atoi(text); err == nil && n > 0 {
		return Column{Number: n}
	}
	return Column{Name: text}
}

func (r *reader) files(list *value, path string) []FileLayout {
	if list == nil || !list.ok {
		return nil
	}
	var layouts []FileLayout
	for i, v := range list.items {
		if v.ok {
			layouts = append(layouts, r.file1(v, fmt.Sprintf("%s file %d", path, i+1)))
		}
	}
	return layouts
}

func (r *reader) file1(v *value, path string) FileLayout {
	l := FileLayout{Path: v.textAt("path", ""), Delimiter: ',', Skip: int(v.numberAt("skip", 0)), Header: true,
		AfterHeader: int(v.numberAt("after_header", 0)), DecimalComma: v.textAt("decimal", "point") == "comma", Line: v.node.Line}
	if v.given("header") {
		l.Header = v.at("header").yes
	}
	if _, err := filepath.Match(l.Path, "x"); err != nil {
		r.problem(v.at("path").node, "close the bracket, or put a backslash before it", "%s path %s is not a pattern", path, short(l.Path))
	}
	if v.given("delimiter") {
		l.Delimiter = r.delimiter(v.at("delimiter"), path)
	}
	if l.DecimalComma && l.Delimiter == ',' {
		r.problem(v.node, "name the delimiter, such as delimiter: semicolon", "%s has the comma both between fields and before decimals", path)
	}
	r.stamp(v, &l, path)
	if m := v.at("missing"); m != nil && m.ok {
		for _, item := range m.items {
			l.Missing = append(l.Missing, item.text)
		}
	}
	if t := v.at("time"); t != nil && t.ok {
		for _, item := range t.items {
			l.Time = append(l.Time, r.column(item, l.Header, path+" time"))
		}
	}
	if c := v.at("columns"); c != nil && c.ok {
		if len(c.keys) == 0 {
			r.problem(c.node, "write a channel and its column, such as g1_mv: SR_Avg", "%s columns has none", path)
		}
		for _, name := range c.keys {
			if c.given(name) {
				r.reserved(c.at(name).node, name, path)
				l.Channels = append(l.Channels, FileChannel{name, r.column(c.at(name), l.Header, path+" column "+name)})
			}
		}
		slices.SortFunc(l.Channels, func(a, b FileChannel) int { return strings.Compare(a.Channel, b.Channel) })
	}
	return l
}

func (r *reader) column(v *value, header bool, path string) Column {
	c := columnOf(v.text)
	if v.ok && c.Number == 0 && !header {
		r.problem(v.node, "give its number from 1, or say header: true", "%s is %s, and the file has no header that names columns", path, short(v.text))
	}
	return c
}

var delimiterWords = map[string]byte{"tab": '\t', "space": ' ', "semicolon": ';', "pipe": '|', "comma": ','}

func (r *reader) delimiter(v *value, path string) byte {
	if b, known := delimiterWords[v.text]; known {
		return b
	}
	if len(v.text) == 1 && v.text[0] > ' ' && v.text[0] < 0x7f && !strings.Contains(`".-+`, v.text) && (v.text[0] < '0' || v.text[0] > '9') {
		return v.text[0]
	}
	r.problem(v.node, "write one character that is no part of a number, or tab, space, semicolon, pipe", "%s delimiter is %s", path, short(v.text))
	return ','
}

func (r *reader) stamp(v *value, l *FileLayout, path string) {
	text := v.textAt("time_format", "rfc3339")
	pattern, err := NewTimePattern(text)
	if err != nil {
		r.problem(v.at("time_format").node, "write it with YYYY MM DD hh mm ss, such as DD/MM/YYYY hh:mm:ss", "%s time_format %s: %v", path, short(text), err)
	}
	l.Stamp = pattern
	if pattern == nil {
		return
	}
	switch zone := v.at("zone"); {
	case zone == nil && !pattern.Zoned():
		r.problem(v.node, "add zone: UTC, or the logger's offset such as zone: +01:00", "%s has no zone, and its times carry none", path)
	case zone != nil && zone.ok && pattern.Zoned():
		r.problem(zone.node, "leave it out", "%s has a zone, but its times carry their own", path)
	case zone != nil && zone.ok:
		if l.Zone = fixedZone(zone.text); l.Zone == nil {
			r.problem(zone.node, "write UTC or an offset such as +01:00; a clock that changes to summer time has an hour that nobody can tell apart",
				"%s zone is %s", path, short(zone.text))
		}
	}
}

func fixedZone(text string) *time.Location {
	if text == "UTC" || text == "Z" {
		return time.UTC
	}
	at, err := time.Parse("-07:00", text)
	if err != nil {
		return nil
	}
	_, offset := at.Zone()
	if offset < -14*3600 || offset > 14*3600 {
		return nil
	}
	return time.FixedZone(text, offset)
}

func (r *reader) modbus(list *value, path string, units map[string]string) []ModbusDevice {
	if list == nil || !list.ok {
		return nil
	}
	var devices []ModbusDevice
	for i, v := range list.items {
		if v.ok {
			devices = append(devices, r.modbusDevice(v, fmt.Sprintf("%s modbus %d", path, i+1), units))
		}
	}
	return devices
}

func (r *reader) modbusDevice(v *value, path string, units map[string]string) ModbusDevice {
	d := ModbusDevice{URL: v.textAt("url", ""), Device: uint8(v.numberAt("device", 1)), Baud: uint(v.numberAt("baud", 19200)),
		Parity: v.textAt("parity", "even"), StopBits: 1, Every: time.Second, Timeout: 500 * time.Millisecond, Line: v.node.Line}
	if v.textAt("stop_bits", "1") == "2" {
		d.StopBits = 2
	}
	if v.given("timeout") {
		d.Timeout = v.at("timeout").span
	}
	if v.given("every") {
		if d.Every = v.at("every").span; d.Every%time.Second != 0 {
			r.problem(v.at("every").node, "write whole seconds", "%s every is %s", path, d.Every)
		}
	}
	if u, err := url.Parse(d.URL); v.given("url") && (err != nil || (u.Scheme == "rtu") != (u.Host == "") || !slices.Contains([]string{"tcp", "rtu", "rtuovertcp"}, u.Scheme) ||
		(u.Scheme == "rtu" && u.Path == "") || (u.Scheme != "rtu" && u.Port() == "")) {
		r.problem(v.at("url").node, "write tcp://host:502, rtu:///dev/ttyUSB0 or rtuovertcp://host:port", "%s url is %s", path, short(d.URL))
	}
	registers := v.at("registers")
	if registers == nil || !registers.ok {
		return d
	}
	if len(registers.keys) == 0 {
		r.problem(registers.node, "write a channel and its register", "%s registers has none", path)
	}
	for _, name := range registers.keys {
		if registers.given(name) {
			r.reserved(registers.at(name).node, name, path)
			d.Values = append(d.Values, r.modbusValue(name, registers.at(name), path+" register "+name, units))
		}
	}
	slices.SortFunc(d.Values, func(a, b ModbusValue) int {
		if a.Input != b.Input {
			if a.Input {
				return 1
			}
			return -1
		}
		if a.Address != b.Address {
			return int(a.Address) - int(b.Address)
		}
		return strings.Compare(a.Channel, b.Channel)
	})
	return d
}

func (r *reader) modbusValue(name string, v *value, path string, units map[string]string) ModbusValue {
	m := ModbusValue{Channel: name, Address: uint16(v.numberAt("address", 0)), Input: v.textAt("table", "holding") == "input", Type: v.textAt("type", "uint16"),
		LowFirst: v.textAt("words", "high_first") == "low_first", Scale: v.numberAt("scale", 1), Offset: v.numberAt("offset", 0),
		Missing: v.numberAt("missing", math.NaN())}
	if at := v.numberAt("address", 0); at != math.Trunc(at) || int(at)+m.Registers() > 65536 {
		r.problem(v.at("address").node, "write a whole number, from 0, with room for the type", "%s address is %g", path, at)
	}
	if m.Scale == 0 {
		r.problem(v.at("scale").node, "write what one step of the number is worth", "%s scale is 0: every value would be the same", path)
	}
	if v.given("words") && m.Registers() == 1 {
		r.problem(v.at("words").node, "leave it out", "%s is one word long: it has no order of words", path)
	}
	if unit, want := v.textAt("unit", ""), units[name]; unit != "" && want != "" && unit != want {
		r.problem(v.at("unit").node, "mend the unit, or scale the value", "%s is in %s, but what reads the channel takes it as %s", path, short(unit), want)
	}
	return m
}

// channelUnits says in which unit each declared channel of a station is read.
func channelUnits(st *Station) map[string]string {
	units := map[string]string{}
	for i := range st.Instruments {
		in := &st.Instruments[i].Input
		units[in.Signal], units[in.Case], units[in.Dome] = in.SignalUnit, in.CaseUnit, in.DomeUnit
		if in.Irradiance != "" {
			units[in.Irradiance] = st.Instruments[i].Measures.Unit()
		}
	}
	for _, w := range st.Weather {
		units[w.Channel] = w.Unit
	}
	return units
}
