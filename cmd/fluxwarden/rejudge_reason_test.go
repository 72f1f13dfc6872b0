package main

import (
	"strings"
	"testing"

	"fluxwarden/rules"
)

func TestRulesChangeInAFewWords(t *testing.T) {
	parse := func(text string) *rules.Station {
		s, err := rules.Parse("site.yaml", []byte(text))
		if err != nil {
			t.Fatal(err)
		}
		return &s.Stations[0]
	}
	old := yard("start", "2026-06-08", "8.62")
	for _, c := range []struct{ name, text, want string }{
		{"nothing", old, ""},
		{"another name", strings.Replace(old, "name: Yard", "name: Back yard", 1), ""},
		{"the second sensitivity", yard("start", "2026-06-08", "8.70"), "new calibration of G1 from 2026-06-08"},
		{"an earlier change", yard("start", "2026-06-01", "8.62"), "new calibration of G1 from 2026-06-01"},
		{"a later change", yard("start", "2026-06-15", "8.62"), "new calibration of G1 from 2026-06-08"},
		{"two instruments", strings.Replace(yard("start", "2026-06-08", "8.70"), "sensitivity: 8.11", "sensitivity: 8.12", 1),
			"new calibration of G1 from 2026-06-08, new calibration of D1 from 2010-01-01"},
		{"labels", yard("end", "2026-06-08", "8.62"), "new rules: time"},
		{"labels and a calibration", yard("end", "2026-06-08", "8.70"), "new rules: new calibration of G1 from 2026-06-08, time"},
		{"position", strings.Replace(old, "elevation: 50", "elevation: 51", 1), "new rules: position"},
		{"a class", strings.Replace(old, "global, class: A", "global, class: B", 1), "new rules: instrument G1"},
		{"an instrument's name", strings.Replace(old, "id: D1", "id: D2", 1), "new rules: instrument D2 is new, instrument D1 is gone"},
	} {
		if got := rulesChange(parse(old), parse(c.text)); got != c.want {
			t.Errorf("%s: %q, want %q", c.name, got, c.want)
		}
	}
	if got := rulesChange(nil, parse(old)); !strings.Contains(got, "not in them before") {
		t.Errorf("a new station: %q", got)
	}
}
