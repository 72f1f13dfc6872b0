package wire

import (
	"bytes"
	"compress/gzip"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"testing/iotest"

	"fluxwarden/qc/minute"
)

// readAll gives all rows of a file as readings, and what was refused.
func readAll(t *testing.T, r io.Reader, options CSVOptions) ([]minute.Reading, []LineRefusal) {
	t.Helper()
	c, err := NewCSV(r, options)
	if err != nil {
		t.Fatal(err)
	}
	var all []minute.Reading
	var b minute.Batch
	for {
		err := c.Next(&b)
		if err == io.EOF {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		for i := range b.Rows() {
			all = append(all, b.Reading(i))
		}
	}
	if c.Rows() != int64(len(all)) {
		t.Errorf("Rows is %d, %d came", c.Rows(), len(all))
	}
	kept, n := c.Refused()
	if n != len(kept) && n <= RefusalsKeptMax {
		t.Errorf("%d refusals counted, %d kept", n, len(kept))
	}
	return all, kept
}

func TestCSVForms(t *testing.T) {
	const want = "1:a=1.5 b=-2;2:b=3"
	for name, text := range map[string]string{
		"plain":              "time,a,b\n2026-06-21T12:00:01Z,1.5,-2\n2026-06-21T12:00:02Z,,3\n",
		"no last newline":    "time,a,b\n2026-06-21T12:00:01Z,1.5,-2\n2026-06-21T12:00:02Z,,3",
		"time in between":    "a,time,b\n1.5,2026-06-21T12:00:01Z,-2\n,2026-06-21T12:00:02Z,3\n",
		"time at the end":    "a,b,time\n1.5,-2,2026-06-21T12:00:01Z\n,3,2026-06-21T12:00:02Z\n",
		"CRLF":               "time,a,b\r\n2026-06-21T12:00:01Z,1.5,-2\r\n2026-06-21T12:00:02Z,,3\r\n",
		"byte order mark":    "\ufefftime,a,b\n2026-06-21T12:00:01Z,1.5,-2\n2026-06-21T12:00:02Z,,3\n",
		"blank lines":        "\n\ntime,a,b\n\n2026-06-21T12:00:01Z,1.5,-2\n  \n\r\n2026-06-21T12:00:02Z,,3\n\n",
		"quotes":             "\"time\",\"a\",\"b\"\n\"2026-06-21T12:00:01Z\",\"1.5\",-2\n2026-06-21T12:00:02Z,\"\",\"3\"\n",
		"spaces":             " time , a , b \n 2026-06-21T12:00:01Z , 1.5 , -2 \n2026-06-21T12:00:02Z,  , 3\n",
		"other number forms": "time,a,b\n2026-06-21T12:00:01Z,+1.5e0,-2.\n2026-06-21T12:00:02Z,,0.3E1\n",
	} {
		for kind, r := range map[string]io.Reader{"whole": strings.NewReader(text), "byte by byte": iotest.OneByteReader(strings.NewReader(text)), "gzip": zipped(t, text)} {
			all, refused := readAll(t, r, CSVOptions{Name: name})
			var got []string
			for _, r := range all {
				s := fmt.Sprintf("%d:", r.At/minute.MicrosPerSecond-1782043200)
				for i, v := range r.Values {
					s += strings.Repeat(" ", min(i, 1)) + fmt.Sprintf("%s=%g", v.Channel, v.Mean)
				}
				got = append(got, s)
			}
			if strings.Join(got, ";") != want || len(refused) > 0 {
				t.Errorf("%s, %s: got %v, refused %v", name, kind, got, refused)
			}
		}
	}
}

func zipped(t *testing.T, text string) *bytes.Buffer {
	t.Helper()
	var b bytes.Buffer
	z := gzip.NewWriter(&b)
	if _, err := io.WriteString(z, text); err != nil {
		t.Fatal(err)
	}
	if err := z.Close(); err != nil {
		t.Fatal(err)
	}
	return &b
}

func TestCSVBadLinesAreRefusedAndTheRestGoesOn(t *testing.T) {
	const good = "2026-06-21T12:00:01Z,1,2"
	for _, c := range []struct {
		line   string
		column int
		reason Reason
	}{
		{"yesterday,1,2", 1, BadTime},
		{"2026-06-21T12:00:01,1,2", 1, BadTime},
		{",1,2", 1, BadTime},
		{"2026-06-21T12:00:01Z,1,off", 3, BadValue},
		{"2026-06-21T12:00:01Z,NaN,2", 2, BadValue},
		{"2026-06-21T12:00:01Z,1e400,2", 2, BadValue},
		{"2026-06-21T12:00:01Z,1_000,2", 2, BadValue},
		{"2026-06-21T12:00:01Z,0x1p3,2", 2, BadValue},
		{"2026-06-21T12:00:01Z,1 5,2", 2, BadValue},
		{"2026-06-21T12:00:01Z,1", 0, BadFields},
		{"2026-06-21T12:00:01Z,1,2,", 0, BadFields},
		{"2026-06-21T12:00:01Z,1,5,2,5", 0, BadFields},
		{"2026-06-21T12:00:01Z,\"1,2", 0, BadFields},
		{"2026-06-21T12:00:01Z,\"1\"5,2", 0, BadFields},
		{"2026-06-21T12:00:01Z,1\"5\",2", 0, BadFields},
		{"\"2026-06-21T12:00:01Z\",1,x", 3, BadValue},
		{strings.Repeat("7", LineBytesMax+1), 0, LineTooLong},
		{strings.Repeat("7", 3*LineBytesMax), 0, LineTooLong},
	} {
		text := "time,a,b\n" + good + "\n" + c.line + "\n" + good + "\n"
		all, refused := readAll(t, strings.NewReader(text), CSVOptions{Name: "readings.csv"})
		if len(all) != 2 || len(refused) != 1 {
			t.Errorf("%.60q: %d rows, refused %v", c.line, len(all), refused)
			continue
		}
		if r := refused[0]; r.Line != 3 || r.Column != c.column || r.Reason != c.reason || !strings.HasPrefix(r.Error(), "readings.csv:3: ") {
			t.Errorf("%.60q: %v, want column %d and %s", c.line, &r, c.column, c.reason)
		}
	}
}

func TestADamagedFileIsReadAsFarAsItGoes(t *testing.T) {
	f, err := os.Open("../../testdata/wire/damaged.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer func() { _ = f.Close() }()
	all, refused := readAll(t, f, CSVOptions{Name: "damaged.csv"})
	var got []string
	for i := range refused {
		got = append(got, refused[i].Error())
	}
	want := []string{
		`damaged.csv:3: column 1: bad_value: g1_mv is "off": give a finite number, or leave the field empty where there is none`,
		`damaged.csv:4: column 2: bad_time: time is "21.06.2026 12:02": give RFC 3339 with a zone, such as 2026-06-21T12:00:01Z, between 1950 and 2100`,
		"damaged.csv:6: bad_fields: 4 fields, the header has 3: is a comma missing, or used as a decimal point?",
		"damaged.csv:7: truncated: the last line ends early: what came before it is kept; fetch the file again",
	}
	if len(all) != 1 || !slices.Equal(got, want) {
		t.Errorf("%d rows, refused:\n%s", len(all), strings.Join(got, "\n"))
	}
}

func TestCSVTruncatedEnd(t *testing.T) {
	const text = "time,a,b\n2026-06-21T12:00:01Z,1,2\n2026-06-21T12:00:02Z,1"
	for _, cut := range []string{text, text[:len(text)-3], text[:len(text)-8]} {
		all, refused := readAll(t, strings.NewReader(cut), CSVOptions{Name: "x.csv"})
		if len(all) != 1 || len(refused) != 1 || refused[0].Reason != Truncated || refused[0].Line != 3 {
			t.Errorf("%q: %d rows, %v", cut, len(all), refused)
		}
	}
	var long strings.Builder
	long.WriteString("time,a\n")
	for i := range 50_000 {
		fmt.Fprintf(&long, "2026-06-21T12:%02d:%02dZ,%d\n", i/60%60, i%60, i*7919)
	}
	whole := zipped(t, long.String()).Bytes()
	all, refused := readAll(t, bytes.NewReader(whole[:len(whole)/2]), CSVOptions{Name: "x.csv.gz", Rows: 1000})
	if len(all) < 10_000 || len(refused) != 1 || refused[0].Reason != Truncated {
		t.Errorf("half a gzip file: %d rows, %v", len(all), refused)
	}
}

func TestCSVHeadersThatCannotBeRead(t *testing.T) {
	for _, c := range []struct{ text, wanted string }{
		{"", "no header"},
		{"\n\n", "no header"},
		{"a,b\n1,2\n", "no column `time` among"},
		{"Timestamp,a\n", `column 1 is "Timestamp"; name the column`},
		{"time;a;b\n", `separated by ";"`},
		{"time\ta\n", `separated by "\t"`},
		{"time,a,a\n", `column 3: duplicate_key: "a" is the name of column 2 already`},
		{"time,a,time\n", "duplicate_key"},
		{"time,Global (W/m2)\n", "column 2: bad_channel"},
		{"time,a,\n", "column 3: bad_channel"},
		{"time,\"a\n", "not closed"},
		{"time" + strings.Repeat(",a", 600), "too_many_channels"},
		{strings.Repeat("a", LineBytesMax+1) + "\n", "line_too_long"},
	} {
		_, err := NewCSV(strings.NewReader(c.text), CSVOptions{Name: "readings.csv"})
		var r *LineRefusal
		if !errors.As(err, &r) || !strings.Contains(err.Error(), c.wanted) || !strings.HasPrefix(err.Error(), "readings.csv:") {
			t.Errorf("%.60q: %v, want %q", c.text, err, c.wanted)
		}
	}
	if _, err := NewCSV(strings.NewReader("\x1f\x8bnot really"), CSVOptions{Name: "x"}); err == nil {
		t.Error("a broken gzip header was taken")
	}
	broken := errors.New("disk on fire")
	c, err := NewCSV(io.MultiReader(strings.NewReader("time,a\n2026-06-21T12:00:01Z,1\n"), iotest.ErrReader(broken)), CSVOptions{Name: "x"})
	if err != nil {
		t.Fatal(err)
	}
	if err := c.Next(&minute.Batch{}); !errors.Is(err, broken) {
		t.Errorf("a read error became %v", err)
	}
}

func TestCSVRefusalsAreBoundedAndUnknownChannelsNamed(t *testing.T) {
	c, err := NewCSV(strings.NewReader("time,a,b\n"+strings.Repeat("bad\n", 5000)), CSVOptions{Known: func(n string) bool { return n == "a" }})
	if err != nil {
		t.Fatal(err)
	}
	if err := c.Next(&minute.Batch{}); err != io.EOF {
		t.Fatal(err)
	}
	if kept, n := c.Refused(); len(kept) != RefusalsKeptMax || n != 5000 {
		t.Errorf("%d kept of %d", len(kept), n)
	}
	if u := c.Unknown(); len(u) != 1 || u[0] != "b" {
		t.Errorf("unknown: %v", u)
	}
}

// FuzzCSV holds the reader against encoding/csv on input without quotes, where the two agree on what a line is.
func FuzzCSV(f *testing.F) {
	files, err := filepath.Glob("../../testdata/wire/*.csv")
	if err != nil || len(files) == 0 {
		f.Fatalf("no seeds in testdata/wire: %v", err)
	}
	for _, file := range files {
		b, err := os.ReadFile(file)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(string(b))
	}
	f.Add("time,a,b\n2026-06-21T12:00:01Z,1.5,-2\n,,\nx\n2026-06-21T12:00:02Z,,3")
	f.Add("a,time\r\n1,2026-06-21T12:00:01Z\r\n")
	f.Add("\"time\",a\n\"2026-06-21T12:00:01Z\",\"1\"\n")
	f.Fuzz(func(t *testing.T, text string) {
		c, err := NewCSV(strings.NewReader(text), CSVOptions{Rows: 3})
		if err != nil {
			return
		}
		var rows []minute.Reading
		var b minute.Batch
		for {
			err := c.Next(&b)
			if err != nil {
				break
			}
			for i := range b.Rows() {
				rows = append(rows, b.Reading(i))
			}
		}
		if strings.ContainsAny(text, "\"\r") || strings.HasPrefix(text, byteOrderMark) || strings.HasPrefix(text, gzipMagic) {
			return
		}
		if want := referenceCSV(text, c.names); len(rows) != len(want) {
			t.Fatalf("%q: %d rows, the reference has %d", text, len(rows), len(want))
		} else {
			for i := range want {
				if !sameReading(&rows[i], &want[i]) {
					t.Fatalf("%q: row %d is %+v, the reference has %+v", text, i, rows[i], want[i])
				}
			}
		}
	})
}

func referenceCSV(text string, names []string) (out []minute.Reading) {
	in := csv.NewReader(strings.NewReader(text))
	in.FieldsPerRecord, in.LazyQuotes = -1, true
	header := true
	for {
		fields, err := in.Read()
		if err != nil {
			return out
		}
		if strings.TrimSpace(strings.Join(fields, "")) == "" && len(fields) == 1 {
			continue
		}
		if header {
			header = false
			continue
		}
		if r, ok := referenceRow(fields, names); ok {
			out = append(out, r)
		}
	}
}

func referenceRow(fields, names []string) (r minute.Reading, ok bool) {
	if len(fields) != len(names) {
		return r, false
	}
	for i, field := range fields {
		field = strings.TrimSpace(field)
		switch {
		case names[i] == TimeColumn:
			if r.At, ok = ParseTime([]byte(field)); !ok {
				return r, false
			}
		case field == "":
		case !csvNumber.MatchString(field):
			return r, false
		default:
			var v float64
			if n, err := fmt.Sscan(field, &v); n != 1 || err != nil || math.IsInf(v, 0) {
				return r, false
			}
			r.Values = append(r.Values, minute.ChannelValue{Channel: names[i], Value: minute.Single(v + 0)})
		}
	}
	return r, true
}

// BenchmarkCSV reads a file of 65,536 rows and seven channels.
func BenchmarkCSV(b *testing.B) {
	var text bytes.Buffer
	text.WriteString("time,g1_mv,d1_mv,n1_mv,l1_mv,l1_case_c,ta_c,rh_pct\n")
	const rows = 65_536
	for i := range rows {
		at := AppendTime(nil, minute.Stamp(1767225600_000000+int64(i)*minute.MicrosPerMinute))
		fmt.Fprintf(&text, "%s,%.3f,%.3f,%.3f,%.3f,%.2f,%.2f,%.1f\n", at, float64(i%9000)/1000, float64(i%700)/1000, float64(i%7919)/1000,
			-float64(i%300)/1000, float64(i%3000)/100, float64(i%2900)/100, float64(i%1000)/10)
	}
	b.SetBytes(int64(text.Len()))
	b.ReportAllocs()
	var batch minute.Batch
	for b.Loop() {
		c, err := NewCSV(bytes.NewReader(text.Bytes()), CSVOptions{})
		if err != nil {
			b.Fatal(err)
		}
		if err := c.Next(&batch); err != nil || batch.Rows() != rows {
			b.Fatal(batch.Rows(), err)
		}
	}
	b.ReportMetric(float64(rows)*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mrows/s")
}
