package main

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// budgetSite is an invented station: a global of class A behind a voltage, one of no class whose logger converts, and a pyrgeometer.
const budgetSite = `network: {id: budget, name: Invented}
stations:
  - id: terrace
    name: Terrace
    latitude: 40
    longitude: 10
    elevation: 100
    time: {label: end, interval: 60s}
    instruments:
      - {id: G1, measures: global, class: A, primary: true, input: {signal: g_mv, unit: mV},
         calibrations: [{from: 2026-01-01, sensitivity: 10, unit: uV/(W/m2), uncertainty: 1.2%, scale: WRR}]}
      - {id: G2, measures: global, input: {irradiance: g2}}
      - {id: L1, measures: lw_down, shaded: true, input: {signal: l_mv, unit: mV, case: l_c},
         calibrations: [{from: 2026-01-01, sensitivity: 10, unit: uV/(W/m2), scale: SI}]}
`

// budgetText runs budget for what the flags would say and gives what it prints.
func budgetText(t *testing.T, q budgetRequest, site, instrument, at string) string {
	t.Helper()
	if err := q.resolve(site, "", instrument, at); err != nil {
		t.Fatal(err)
	}
	var out strings.Builder
	if err := q.print(&out); err != nil {
		t.Fatal(err)
	}
	return out.String()
}

func writeBudgetSite(t *testing.T) string {
	t.Helper()
	name := filepath.Join(t.TempDir(), "site.yaml")
	if err := os.WriteFile(name, []byte(budgetSite), 0o644); err != nil {
		t.Fatal(err)
	}
	return name
}

func wantLines(t *testing.T, text string, want ...string) {
	t.Helper()
	squeezed := strings.Join(strings.Fields(text), " ")
	for _, w := range want {
		if !strings.Contains(squeezed, w) {
			t.Errorf("no %q in:\n%s", w, text)
		}
	}
}

// TestBudgetFromFlags is worked by hand: at 1000 W/m2 of beam from the zenith a year after a calibration of 1.2 % (k=2), class A (ISO
// 9060:2018, from memory): squares of 7, 2, 8 (0.8 % a year, 365 days of 365.25), 5, 10, 5, 10, 5 over 3, of the logger's 1 and 0.5 over 3,
// and of 6.
func TestBudgetFromFlags(t *testing.T) {
	q := budgetRequest{value: 1000, beamWm2: 1000, zenithDeg: 0, netWm2: math.NaN(), bodyC: math.NaN()}
	text := budgetText(t, q, writeBudgetSite(t), "G1", "2027-01-01")
	stability := 8 * 365 / 365.25
	u := math.Sqrt((7*7+2*2+stability*stability+5*5+10*10+5*5+10*10+5*5+1+0.25)/3 + 36)
	wantLines(t, text, "terrace G1, global, 2027-01-01T00:00Z: ISO 9060:2018 class A", "calibration 6.000", "certificate 1.2 %",
		fmt.Sprintf("combined standard uncertainty %.2f W/m2", u), fmt.Sprintf("expanded, k=2 (U95) %.2f W/m2", 2*u),
		"largest part: calibration", "target of 2004: 20.0 W/m2, not met")
}

// TestBudgetSaysWhatItAssumes where the flags and the site file leave it open.
func TestBudgetSaysWhatItAssumes(t *testing.T) {
	nan := math.NaN()
	site := writeBudgetSite(t)
	q := budgetRequest{value: 800, beamWm2: nan, zenithDeg: nan, netWm2: nan, bodyC: nan}
	wantLines(t, budgetText(t, q, site, "G2", "2026-06-21T11:20:00Z"), "not classified: held to ISO 9060:2018 class C", "assumed 5 %",
		"calibration not dated, taken as 2 years old", "sun at 16.", "beam 52") // kt 0.634, of which 63 % is beam
	q.value = 350
	wantLines(t, budgetText(t, q, site, "L1", "2026-06-21T11:20:00Z"), "pyrgeometer, limits assumed", "dome, taken as coupled")
}

// TestBudgetOfAnArchivedMinute: what the table comes to is what the archive holds.
func TestBudgetOfAnArchivedMinute(t *testing.T) {
	site := writeBudgetSite(t)
	dir := t.TempDir()
	readings := "time,g_mv,g2,l_mv,l_c\n"
	for m := range 120 {
		readings += fmt.Sprintf("2026-06-21T%02d:%02d:00Z,%.3f,%d,-0.9,20\n", 11+m/60, m%60, 8.1+0.01*float64(m%7), 812+m%5)
	}
	csv := filepath.Join(dir, "readings.csv")
	if err := os.WriteFile(csv, []byte(readings), 0o644); err != nil {
		t.Fatal(err)
	}
	archive := filepath.Join(dir, "archive")
	if code := cmdJudge([]string{"--site", site, "--archive", archive, csv}); code != exitOK {
		t.Fatalf("judge: exit code %d", code)
	}
	nan := math.NaN()
	q := budgetRequest{archive: archive, value: nan, beamWm2: nan, zenithDeg: nan, netWm2: nan, bodyC: nan}
	text := budgetText(t, q, site, "G1", "2026-06-21T11:30:00Z")
	// The record of 11:31 is the minute from 11:30: 8.1 + 0.01 * (31 % 7) mV over 10 uV/(W/m2).
	wantLines(t, text, "value 813.00 W/m2", "net longwave -90.0 W/m2", "in the archive: 813.00 with U95")
	var combined, stored float64
	for _, line := range strings.Split(text, "\n") {
		fmt.Sscanf(line, "expanded, k=2 (U95) %f", &combined)
		fmt.Sscanf(line, "in the archive: 813.00 with U95 %f", &stored)
	}
	if !(combined > 0) || math.Abs(combined-stored) > 1.0/64+0.01 {
		t.Errorf("table %v, archive %v:\n%s", combined, stored, text)
	}
	if second := budgetText(t, q, site, "G2", "2026-06-21T11:30:00Z"); strings.Contains(second, "in the archive") {
		t.Errorf("an instrument that is not primary is not in the archive's minutes:\n%s", second)
	}
	if err := q.resolve(site, "", "G1", "2026-06-22"); err != nil {
		t.Fatal(err)
	}
	if err := q.print(&strings.Builder{}); err == nil || !strings.Contains(err.Error(), "G1 has no value") {
		t.Errorf("a minute without a reading: %v", err)
	}
}

func TestBudgetRefuses(t *testing.T) {
	site := writeBudgetSite(t)
	for _, args := range [][]string{
		{},
		{"--site", site, "--instrument", "G1"},
		{"--site", site, "--instrument", "G1", "--archive", t.TempDir()},
		{"--site", site, "--instrument", "G1", "--archive", t.TempDir(), "--time", "2026-06-21", "--irradiance", "500"},
		{"--site", site, "--instrument", "G9", "--irradiance", "500"},
		{"--site", site, "--station", "nowhere", "--instrument", "G1", "--irradiance", "500"},
		{"--site", site, "--instrument", "G1", "--irradiance", "500", "--zenith", "-1"},
		{"--site", site, "--instrument", "G1", "--irradiance", "Inf"},
		{"--site", site, "--instrument", "G1", "--irradiance", "500", "--time", "noon"},
		{"--site", site + ".not", "--instrument", "G1", "--irradiance", "500"},
	} {
		if code := cmdBudget(args); code != exitUsage {
			t.Errorf("budget %v: exit code %d, want %d", args, code, exitUsage)
		}
	}
	if code := cmdBudget([]string{"--site", site, "--instrument", "G1", "--irradiance", "500", "--time", "2020-01-01"}); code != exitProblem {
		t.Errorf("before the first calibration: exit code %d, want %d", code, exitProblem)
	}
}
