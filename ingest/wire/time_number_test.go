package wire

import (
	"math"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"fluxwarden/qc/minute"
)

func TestParseTime(t *testing.T) {
	at := func(s string) minute.Stamp {
		v, err := time.Parse(time.RFC3339Nano, s)
		if err != nil {
			t.Fatal(err)
		}
		return minute.Stamp(v.UnixMicro())
	}
	for _, c := range []struct{ text, want string }{
		{"2026-06-21T12:00:01Z", "2026-06-21T12:00:01Z"},
		{"2026-06-21t12:00:01z", "2026-06-21T12:00:01Z"},
		{"2026-06-21 12:00:01Z", "2026-06-21T12:00:01Z"},
		{"2026-06-21T12:00:01.5Z", "2026-06-21T12:00:01.5Z"},
		{"2026-06-21T12:00:01.123456999Z", "2026-06-21T12:00:01.123456Z"},
		{"2026-06-21T13:30:01+01:30", "2026-06-21T12:00:01Z"},
		{"2026-01-01T00:30:00+01:00", "2025-12-31T23:30:00Z"},
		{"2026-12-31T23:30:00-01:00", "2027-01-01T00:30:00Z"},
		{"2024-02-29T00:00:00Z", "2024-02-29T00:00:00Z"},
		{"2000-02-29T00:00:00Z", "2000-02-29T00:00:00Z"},
		{"1950-01-01T00:00:00Z", "1950-01-01T00:00:00Z"},
		{"2100-12-31T23:59:59Z", "2100-12-31T23:59:59Z"},
		// The leap seconds of 30 June 2015 and 31 December 2016 (IERS Bulletin C 49 and 52).
		{"2015-06-30T23:59:60Z", "2015-06-30T23:59:59.999999Z"},
		{"2017-01-01T00:59:60.25+01:00", "2016-12-31T23:59:59.999999Z"},
	} {
		got, ok := ParseTime([]byte(c.text))
		if !ok || got != at(c.want) {
			t.Errorf("%s: got %s (%v), want %s", c.text, AppendTime(nil, got), ok, c.want)
		}
	}
	for _, bad := range []string{"", "2026-06-21", "2026-06-21T12:00:01", "2026-06-21T12:00Z", "2026-06-21T24:00:00Z", "2026-06-21T12:60:00Z",
		"2026-06-21T12:00:60Z", "2026-06-21T12:00:61Z", "2026-02-29T12:00:00Z", "2100-02-29T12:00:00Z", "2026-13-01T12:00:00Z", "2026-00-01T12:00:00Z",
		"2026-01-00T12:00:00Z", "1949-12-31T23:59:59Z", "2101-01-01T00:00:00Z", "2026-06-21T12:00:01.Z", "2026-06-21T12:00:01,5Z", "2026-06-21T12:00:01+0100",
		"2026-06-21T12:00:01+24:00", "2026-06-21T12:00:01ZZ", "2026-06-21T12:00:01 Z", "20x6-06-21T12:00:01Z", "2026-6-21T12:00:001Z", "2026/06/21T12:00:01Z", "-026-06-21T12:00:01Z"} {
		if got, ok := ParseTime([]byte(bad)); ok {
			t.Errorf("%q was read as %s", bad, AppendTime(nil, got))
		}
	}
}

func FuzzParseTime(f *testing.F) {
	f.Add("2026-06-21T12:00:01.5+01:00")
	f.Add("2016-12-31T23:59:60Z")
	f.Fuzz(func(t *testing.T, s string) {
		got, ok := ParseTime([]byte(s))
		if len(s) > 19 && (s[17:19] == "60" || s[10] == ' ') { // what the standard library does not read
			return
		}
		want, err := time.Parse(time.RFC3339, strings.ToUpper(s))
		wantOK := err == nil && want.Year() != 0 && s[:4] >= "1950" && s[:4] <= "2100"
		if wantOK && strings.Contains(s, ",") { // it takes a comma for the point, which RFC 3339 does not
			return
		}
		if ok != wantOK || (ok && got != minute.Stamp(want.UnixMicro())) {
			t.Fatalf("%q: got %d (%v), the standard library has %d (%v)", s, got, ok, want.UnixMicro(), err)
		}
	})
}

func TestAppendTimeIsReadBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		at := minute.Stamp(rapid.Int64Range(-631152000_000000, 4133980799_999999).Draw(t, "at"))
		text := AppendTime(nil, at)
		if got, ok := ParseTime(text); !ok || got != at {
			t.Fatalf("%d is written %s and read %d", at, text, got)
		}
		if want := time.UnixMicro(int64(at)).UTC().Format(time.RFC3339Nano); string(text) != want {
			t.Fatalf("%s, the standard library writes %s", text, want)
		}
	})
}

var (
	jsonNumber = regexp.MustCompile(`^-?(0|[1-9][0-9]*)(\.[0-9]+)?([eE][+-]?[0-9]+)?$`) // RFC 8259 section 6
	csvNumber  = regexp.MustCompile(`^[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]+)?$`)
)

func checkNumber(t *testing.T, s string) {
	t.Helper()
	for _, loose := range []bool{false, true} {
		grammar := jsonNumber
		if loose {
			grammar = csvNumber
		}
		got, end, syntax, finite := scanNumber([]byte(s), 0, loose)
		if whole := syntax && end == len(s); whole != grammar.MatchString(s) {
			t.Fatalf("%q (loose %v): read as a number: %v", s, loose, whole)
		} else if !whole {
			continue
		}
		want, err := strconv.ParseFloat(s, 64)
		if finite != (err == nil) {
			t.Fatalf("%q: finite is %v, strconv says %v", s, finite, err)
		}
		if finite && (math.Float64bits(got) != math.Float64bits(want+0)) {
			t.Fatalf("%q: got %x, strconv has %x", s, math.Float64bits(got), math.Float64bits(want))
		}
	}
}

func TestNumbersAreRoundedAsByStrconv(t *testing.T) {
	for _, s := range []string{"0", "-0", "-0.0e5", "8.213", "1e22", "1e23", "1e-22", "1e-23", "999999999999999e22", "9007199254740993", "0.1", "123456789012345.6",
		"5e-324", "2e-324", "1.7976931348623157e308", "1.7976931348623159e308", "1e400", "-1e400", "1e-400", "00.5", "01", "1.", ".5", "+1", ".", "-", "", "1e", "1e+",
		"0000000000000000000000001", "1e99999999999999999999", "0e99999999999999999999", "184467440737095516160.5", "0.000000000000000000000000000001"} {
		checkNumber(t, s)
	}
	rapid.Check(t, func(t *rapid.T) {
		s := rapid.StringMatching(`-?(0|[1-9][0-9]{0,17})(\.[0-9]{1,18})?([eE][+-]?[0-9]{1,3})?`).Draw(t, "number")
		got, end, _, finite := scanNumber([]byte(s), 0, false)
		want, err := strconv.ParseFloat(s, 64)
		if end != len(s) || finite != (err == nil) || (finite && math.Float64bits(got) != math.Float64bits(want+0)) {
			t.Fatalf("%q: %g, strconv has %g", s, got, want)
		}
	})
}

func FuzzNumber(f *testing.F) {
	for _, s := range []string{"8.213", "-1e-22", "1e400", "0.1234567890123456789", "+.5e1", "01"} {
		f.Add(s)
	}
	f.Fuzz(checkNumber)
}
