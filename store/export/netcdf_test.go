package export

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"strings"
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// TestEmptyNetCDF: the least file there can be is 32 bytes of the specification, here with the magic of 64-bit offsets.
func TestEmptyNetCDF(t *testing.T) {
	var b bytes.Buffer
	f := &ncFile{}
	w, err := f.begin(&b)
	if err == nil {
		err = w.end()
	}
	want := append([]byte{'C', 'D', 'F', 2}, make([]byte, 28)...)
	if err != nil || !bytes.Equal(b.Bytes(), want) {
		t.Errorf("% x, %v", b.Bytes(), err)
	}
}

// A classicReader reads a file by the specification, apart from the writer.
type classicReader struct {
	b    []byte
	at   int
	dims []int
}

func (r *classicReader) int() int {
	r.at += 4
	return int(int32(binary.BigEndian.Uint32(r.b[r.at-4:])))
}

func (r *classicReader) text() string {
	n := r.int()
	s := string(r.b[r.at : r.at+n])
	r.at += (n + 3) / 4 * 4
	return s
}

func (r *classicReader) attributes() map[string]string {
	m := map[string]string{}
	r.int()
	for n := r.int(); n > 0; n-- {
		name, kind := r.text(), r.int()
		count := r.int()
		size := map[int]int{1: 1, 2: 1, 4: 4, 6: 8}[kind] * count
		raw := r.b[r.at : r.at+size]
		r.at += (size + 3) / 4 * 4
		switch kind {
		case 1:
			m[name] = fmt.Sprint(raw)
		case 2:
			m[name] = string(raw)
		case 4:
			for k := range count {
				m[name] += fmt.Sprint(int32(binary.BigEndian.Uint32(raw[4*k:])), " ")
			}
		case 6:
			m[name] = fmt.Sprint(math.Float64frombits(binary.BigEndian.Uint64(raw)))
		}
	}
	return m
}

type classicVariable struct {
	attributes map[string]string
	kind       int
	values     []float64
}

func readClassic(t *testing.T, b []byte) (global map[string]string, variables map[string]classicVariable, records int) {
	t.Helper()
	if string(b[:4]) != "CDF\x02" {
		t.Fatalf("magic % x", b[:4])
	}
	r := &classicReader{b: b, at: 4}
	records = r.int()
	r.int()
	for n := r.int(); n > 0; n-- {
		r.text()
		r.dims = append(r.dims, r.int())
	}
	global = r.attributes()
	variables = map[string]classicVariable{}
	type place struct {
		name             string
		begin, size, per int
	}
	var of []place
	recordSize := 0
	r.int()
	for n := r.int(); n > 0; n-- {
		name := r.text()
		per, record := 1, false
		for d := r.int(); d > 0; d-- {
			if l := r.dims[r.int()]; l == 0 {
				record = true
			} else {
				per *= l
			}
		}
		v := classicVariable{attributes: r.attributes(), kind: r.int()}
		size := r.int()
		begin := int(binary.BigEndian.Uint64(r.b[r.at:]))
		r.at += 8
		variables[name] = v
		if record {
			recordSize += size
			of = append(of, place{name, begin, size, per})
		}
	}
	for _, p := range of {
		v := variables[p.name]
		for k := range records {
			for j := range p.per {
				x := b[p.begin+k*recordSize+j*map[int]int{1: 1, 4: 4, 6: 8}[v.kind]:]
				switch v.kind {
				case 1:
					v.values = append(v.values, float64(int8(x[0])))
				case 4:
					v.values = append(v.values, float64(int32(binary.BigEndian.Uint32(x))))
				case 6:
					v.values = append(v.values, math.Float64frombits(binary.BigEndian.Uint64(x)))
				}
			}
		}
		variables[p.name] = v
	}
	if records > 0 && of[0].begin+records*recordSize != len(b) {
		t.Errorf("%d bytes, the header tells of %d", len(b), of[0].begin+records*recordSize)
	}
	return global, variables, records
}

func TestNetCDF(t *testing.T) {
	a, err := store.OpenForWriting(vfs.NewMem(), "/archive", store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	const day = 20_625 // 2026-06-21
	if _, err := a.Commit(&store.Commit{Days: []store.Day{{Judged: judged(day), Sealed: true}}, Program: "test"}); err != nil {
		t.Fatal(err)
	}
	request := func(product string) Request {
		return Request{Station: "saltpan", Product: product, From: day * minute.PerDay, To: (day + 1) * minute.PerDay}
	}
	var b bytes.Buffer
	rows, err := NetCDF(&b, a, request("minutes"))
	if err != nil || rows != 3 {
		t.Fatalf("%d rows, %v", rows, err)
	}
	global, of, records := readClassic(t, b.Bytes())
	if records != 3 || !strings.Contains(global["Conventions"], "CF-1.8") || global["featureType"] != "timeSeries" {
		t.Errorf("%d records, %v", records, global)
	}
	for name, want := range map[string][]float64{
		"time":            {86400 * day, 86400*day + 60, 86400*day + 120},
		"time_bnds":       {86400 * day, 86400*day + 60, 86400*day + 60, 86400*day + 120, 86400*day + 120, 86400*day + 180},
		"global":          {812.34375, -1.5, fillDouble},
		"global_verdict":  {1, 2, 0},
		"global_n":        {60, 59, 0},
		"air_temperature": {17.90625, 18, fillDouble},
		"zenith_deg":      {45.5, 45.25, 45},
		"global_reasons":  {0, 2, 1}, // in order of the words: none, missing, spike...
	} {
		if got := of[name].values; fmt.Sprint(got) != fmt.Sprint(want) {
			t.Errorf("%s: %v, want %v", name, got, want)
		}
	}
	for _, c := range [][3]string{
		{"time", "units", "seconds since 1970-01-01 00:00:00Z"}, {"time", "bounds", "time_bnds"},
		{"global", "standard_name", "surface_downwelling_shortwave_flux_in_air"}, {"global", "units", "W m-2"}, {"global", "cell_methods", "time: mean"},
		{"global", "ancillary_variables", "global_verdict global_reasons global_measured global_sd global_n global_tests_missed global_tests_passed"},
		{"global_verdict", "flag_meanings", "absent accepted questioned rejected"}, {"global_reasons", "flag_meanings", "none missing spike+closure+dome_wet"},
		{"global_reasons", "flag_values", "0 1 2 "}, {"global_sd", "cell_methods", "time: standard_deviation"}, {"air_temperature", "units", "degree_Celsius"},
	} {
		if got := of[c[0]].attributes[c[1]]; got != c[2] {
			t.Errorf("%s:%s is %q, want %q", c[0], c[1], got, c[2])
		}
	}
	b.Reset()
	if _, err := NetCDF(&b, a, request("clean-day")); err != nil {
		t.Fatal(err)
	}
	_, of, _ = readClassic(t, b.Bytes())
	if got := fmt.Sprint(of["time_bnds"].values, of["global_n"].values); got != fmt.Sprint([]float64{86400 * day, 86400 * (day + 1)}, []float64{1}) {
		t.Errorf("a day: %s", got)
	}
}

func TestWhatCannotBeExported(t *testing.T) {
	a, err := store.OpenForWriting(vfs.NewMem(), "/archive", store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	const day = 20_625
	if _, err := a.Commit(&store.Commit{Days: []store.Day{{Judged: judged(day)}}}); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		r    Request
		want string
	}{
		{Request{Product: "clean-our", To: 1}, "did you mean clean-hour?"},
		{Request{Quantities: []string{"direkt"}, To: 1}, "did you mean direct?"},
		{Request{Quantities: []string{"net_radiation"}, To: 1}, "there is none"},
		{Request{Product: "clean-hour", To: 1 << 30}, "made when a day is sealed"},
		{Request{From: 1, To: 2}, "the archive has them from 2026-06-21 to 2026-06-21"},
		{Request{Quantities: []string{"direct"}, To: 1 << 30}, "no direct in this range"},
		{Request{Product: "raw", To: 1 << 30}, "the archive has no raw of it"},
	} {
		c.r.Station = "saltpan"
		for name, write := range map[string]func() error{
			"csv":     func() error { _, err := CSV(&bytes.Buffer{}, a, c.r); return err },
			"netcdf":  func() error { _, err := NetCDF(&bytes.Buffer{}, a, c.r); return err },
			"parquet": func() error { _, err := Parquet(&bytes.Buffer{}, a, c.r); return err },
		} {
			if name != "csv" && strings.HasPrefix(c.want, "no direct") {
				continue // the other columns of a minute are there
			}
			if err := write(); err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("%s of %+v: %v, want %q", name, c.r, err, c.want)
			}
		}
	}
}
