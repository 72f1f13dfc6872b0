package rules

import (
	"testing"
	"time"
)

func TestTimePatterns(t *testing.T) {
	east := time.FixedZone("+01:00", 3600)
	for _, c := range []struct{ pattern, text, want string }{
		{"YYYY-MM-DD hh:mm:ss", "2026-06-21 12:00:01", "2026-06-21T11:00:01Z"},
		{"YYYY-MM-DD hh:mm:ss", "2026-06-21 12:00:01.25", "2026-06-21T11:00:01.25Z"},
		{"DD/MM/YYYY hh:mm", "1/6/2026 9:05", "2026-06-01T08:05:00Z"}, // day first
		{"DD.MM.YY hh:mm:ss", "21.06.26 00:30:00", "2026-06-20T23:30:00Z"},
		{"YYYY DDD hh:mm", "2026 172 12:00", "2026-06-21T11:00:00Z"},
		{"YYYYMMDDhhmmss", "20260621120001", "2026-06-21T11:00:01Z"},
		{"YYYY-MM-DD hh:mm", "2026-06-21 24:00", "2026-06-21T23:00:00Z"},
		{"YYYY-MM-DD hh:mm:ss", "2016-12-31 23:59:60", "2016-12-31T22:59:59Z"},
		{"YYYY-MM-DDThh:mm:ss", "2026-06-21T12:00:00", "2026-06-21T11:00:00Z"},
		{"rfc3339", "2026-06-21T12:00:00+02:00", "2026-06-21T10:00:00Z"},
		{"unix", "1782043200.5", "2026-06-21T12:00:00.5Z"},
		{"YYYY-MM-DD hh:mm", "2026-02-30 12:00", ""},
		{"YYYY-MM-DD hh:mm", "2026-13-01 12:00", ""},
		{"YYYY-MM-DD hh:mm", "2026-06-21 24:01", ""},
		{"YYYY-MM-DD hh:mm", "2026-06-21 12:00:00", ""},
		{"YYYY-MM-DD hh:mm", "26-06-21 12:00", ""},
		{"YYYY DDD hh:mm", "2026 366 12:00", ""},
		{"DD/MM/YYYY hh:mm", "06/21/2026 12:00", ""},
		{"rfc3339", "2026-06-21 12:00", ""},
		{"unix", "soon", ""},
	} {
		p, err := NewTimePattern(c.pattern)
		if err != nil {
			t.Fatal(c.pattern, err)
		}
		got, err := p.Parse(c.text, east)
		if (err != nil) != (c.want == "") || (err == nil && got.Format(time.RFC3339Nano) != c.want) {
			t.Errorf("%s %q: %v, %v; want %s", c.pattern, c.text, got.Format(time.RFC3339Nano), err, c.want)
		}
	}
	for _, bad := range []string{"", "YYYY-MM-DD", "hh:mm", "YYYY-MM hh:mm", "YYYY-MM-DD-DDD hh:mm", "YY YYYY-MM-DD hh:mm", "2006-01-02 15:04", "YYYY-MM-DD hh:mm zzz"} {
		if _, err := NewTimePattern(bad); err == nil {
			t.Errorf("%q is taken for a pattern", bad)
		}
	}
}

// FuzzTimePattern: what is read back is the time that was written, for every pattern that says the whole time.
func FuzzTimePattern(f *testing.F) {
	f.Add("YYYY-MM-DD hh:mm:ss", "2026-06-21 12:00:01")
	f.Add("DD/MM/YY hh:mm", "1/6/26 9:05")
	f.Fuzz(func(t *testing.T, pattern, text string) {
		p, err := NewTimePattern(pattern)
		if err != nil {
			return
		}
		if at, err := p.Parse(text, time.UTC); err == nil && (at.Location() != time.UTC || at.Nanosecond()%1000 != 0) {
			t.Errorf("%q %q: %v", pattern, text, at)
		}
	})
}
