package main

import (
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// Every kind of fault can be written down, stands in the truth, and the readings are what the judge reads.
func TestSimulateEveryKind(t *testing.T) {
	dir := t.TempDir()
	var list strings.Builder
	list.WriteString("faults:\n")
	for kind := range rules.FaultKind(rules.FaultKindCount) {
		list.WriteString("  - {kind: " + kind.String() + ", instrument: " + simulateAt(kind) + ", from: 2026-06-21T09:00:00Z, to: 2026-06-21T09:30:00Z}\n")
	}
	site, faults, out := filepath.Join(dir, "site.yaml"), filepath.Join(dir, "faults.yaml"), filepath.Join(dir, "readings.csv")
	for path, text := range map[string]string{site: string(demoSite), faults: list.String()} {
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	args := []string{"--site", site, "--station", "redbasin", "--from", "2026-06-21T08:00:00Z", "--to", "2026-06-21T10:00:00Z", "--faults", faults, "--out", out}
	if code := cmdSimulate(args); code != exitOK {
		t.Fatalf("exit code %d", code)
	}
	text, err := os.ReadFile(filepath.Join(dir, "readings.truth.json"))
	if err != nil {
		t.Fatal(err)
	}
	var truth simulationTruth
	if err := json.Unmarshal(text, &truth); err != nil {
		t.Fatal(err)
	}
	if len(truth.Faults) != rules.FaultKindCount || !truth.Synthetic || truth.Climate != "desert" {
		t.Errorf("truth: %s", text)
	}
	if lines := countLines(t, filepath.Join(dir, "readings.true.csv")); lines != 1+2*360 {
		t.Errorf("%d lines of true values, want a header and 720 records", lines)
	}
	if lines := countLines(t, out); lines != 1+90*6 { // the gap takes half an hour
		t.Errorf("%d lines of readings, want a header and 540 records", lines)
	}
	if code := cmdJudge([]string{"--site", site, "--station", "redbasin", "--archive", filepath.Join(dir, "archive"), out}); code != exitOK {
		t.Errorf("judge of the readings: exit code %d", code)
	}
}

// simulateAt is somebody at the demo's desert station who can have the fault.
func simulateAt(kind rules.FaultKind) string {
	switch kind {
	case rules.DataGap, rules.ClockShift:
		return "logger"
	case rules.PointingLost:
		return "tracker"
	case rules.ShadeOff:
		return "D1"
	case rules.ThermistorBad:
		return "L1"
	}
	return "G1"
}

func countLines(t *testing.T, path string) int {
	t.Helper()
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return strings.Count(string(text), "\n")
}

func TestSimulateRefuses(t *testing.T) {
	dir := t.TempDir()
	site, faults := filepath.Join(dir, "site.yaml"), filepath.Join(dir, "faults.yaml")
	if err := os.WriteFile(site, demoSite, 0o600); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct{ faults, want string }{
		{"faults: [{kind: rust}]", `kind "rust"`},
		{"faults: [{kind: noise, loudness: 3}]", "loudness"},
		{"faults: [{kind: noise, instrument: G1, from: yesterday, to: 2026-06-21}]", `time "yesterday"`},
		{"faults: [{kind: noise, instrument: G7, from: 2026-06-20, to: 2026-06-21}]", "has it at one of"},
	} {
		if err := os.WriteFile(faults, []byte(c.faults), 0o600); err != nil {
			t.Fatal(err)
		}
		s, err := loadSimulation(site, "larkmoor", "2026-06-20", "2026-06-21", "", 1)
		if err != nil {
			t.Fatal(err)
		}
		if err := s.addFaults(faults); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", c.faults, err, c.want)
		}
	}
	for _, c := range [][5]string{
		{site, "nowhere", "2026-06-20", "2026-06-21", ""},
		{site, "larkmoor", "2026-06-21", "2026-06-21", ""},
		{site, "larkmoor", "soon", "2026-06-21", ""},
		{site, "larkmoor", "2026-06-20", "2026-06-21", "lunar"},
		{filepath.Join(dir, "none.yaml"), "larkmoor", "2026-06-20", "2026-06-21", ""},
	} {
		if _, err := loadSimulation(c[0], c[1], c[2], c[3], c[4], 1); err == nil {
			t.Errorf("%v was taken", c)
		}
	}
}

// A record labelled by its end belongs to the span that its time begins in.
func TestSimulateSpan(t *testing.T) {
	site, err := rules.Parse("demo_site.yaml", demoSite)
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	path := filepath.Join(dir, "site.yaml")
	if err := os.WriteFile(path, demoSite, 0o600); err != nil {
		t.Fatal(err)
	}
	for _, st := range site.Stations {
		s, err := loadSimulation(path, st.ID, "2026-06-21T00:00:00Z", "2026-06-21T01:00:00Z", "", 1)
		if err != nil {
			t.Fatal(err)
		}
		layout := minute.Layout{LabelEnd: st.Time.LabelEnd, Interval: st.Time.Interval}
		records := 0
		for at := s.first(); s.within(at); at += s.station.Interval() {
			records++
			if m := layout.Minute(at); m < s.from.Minute() || m >= s.to.Minute() {
				t.Errorf("%s: stamp %v belongs to minute %d, outside the span", st.ID, at, m)
			}
		}
		if want := int(minute.Stamp(60*minute.MicrosPerMinute) / s.station.Interval()); records != want {
			t.Errorf("%s: %d records in an hour, want %d", st.ID, records, want)
		}
	}
}
