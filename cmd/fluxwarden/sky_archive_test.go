package main

import (
	"encoding/csv"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// The learnt sky of a past day comes from the archive: its minutes as they were judged, and what the days before had taught by then.
func TestSkyOfThePast(t *testing.T) {
	b := newYard(t, 6)
	archive := filepath.Join(b.dir, "archive")
	b.judge(archive, b.days...)
	rows := func(args ...string) [][]string {
		t.Helper()
		code, out, said := b.run(cmdSky, append([]string{"--archive", archive, "--format", "csv"}, args...)...)
		if code != exitOK {
			t.Fatalf("sky %v: %d %s", args, code, said)
		}
		list, err := csv.NewReader(strings.NewReader(out)).ReadAll()
		if err != nil {
			t.Fatal(err)
		}
		return list
	}
	list := rows("--from", "2026-06-05", "--to", "2026-06-06", "--step", "10m")
	if len(list) != 145 {
		t.Fatalf("%d rows, want a header and 144", len(list))
	}
	column := func(row []string, name string) float64 {
		t.Helper()
		for i, c := range list[0] {
			if c == name {
				v, err := strconv.ParseFloat(row[i], 64)
				if err != nil {
					t.Fatalf("%s is %q", name, row[i])
				}
				return v
			}
		}
		t.Fatalf("no column %s", name)
		return 0
	}
	noon := list[1+72]
	if low, load, high := column(noon, "aerosol_low"), column(noon, "aerosol"), column(noon, "aerosol_high"); !(low < load && load < high && load < 1) {
		t.Errorf("aerosol %v, band %v to %v", load, low, high)
	}
	if g := column(noon, "clear_global"); !(g > 500 && g < 1000) {
		t.Errorf("clear global at noon %v", g)
	}
	if days := column(noon, "days_learnt"); days < 1 || days > 5 {
		t.Errorf("learnt from %v days of five", days)
	}
	if first := rows("--from", "2026-06-01T12:00:00Z", "--to", "2026-06-01T12:01:00Z"); column(first[1], "days_learnt") != 0 {
		t.Errorf("the first day has learnt from %v days", column(first[1], "days_learnt"))
	}
	for _, c := range [][]string{{"--from", "2026-06-05", "--to", "2026-06-06", "--step", "30s"}, {"--from", "2031-01-01", "--to", "2031-01-02"},
		{"--station", "nowhere", "--from", "2026-06-05", "--to", "2026-06-06"}} {
		if code, _, said := b.run(cmdSky, append([]string{"--archive", archive}, c...)...); code != exitProblem || said == "" {
			t.Errorf("%v: code %d, said %q", c, code, said)
		}
	}
}
