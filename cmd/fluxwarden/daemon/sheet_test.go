package daemon

import (
	"bytes"
	"fmt"
	"strings"
	"testing"

	"fluxwarden/qc/fault"
	"fluxwarden/rules"
)

func sheetEpisode(id int, instrument string, kind rules.FaultKind, severity rules.Severity, from, to int64, evidence ...fault.Evidence) fault.Episode {
	return fault.Episode{ID: fmt.Sprint(id), Rev: 1, Station: "moor", Instrument: instrument, Kind: kind, Severity: severity, From: from, To: to, Raised: from + 30,
		Confidence: 0.95, Evidence: evidence, Advice: kind.Entry().Advice}
}

const sheetAt = int64(29_690_000) // 2026-06-14 01:20

// The worst comes first, at most five lines a station; what is over and was not looked at again is left out, what worked stands last.
func TestTheMorningSheet(t *testing.T) {
	open := fault.Open
	list := []fault.Episode{
		sheetEpisode(1, "G1", rules.SensitivityDrift, rules.Act, sheetAt-9000, open, fault.Evidence{Name: "drift", Value: -2.6, Unit: "%"}, fault.Evidence{Name: "days", Value: 30, Unit: "1"}),
		sheetEpisode(2, "D1", rules.DomeSoiled, rules.Watch, sheetAt-7000, open),
		sheetEpisode(3, "G1", rules.SensorTilted, rules.Act, sheetAt-5000, open, fault.Evidence{Name: "tilt", Value: 2.8, Unit: "degrees"}, fault.Evidence{Name: "towards", Value: 240, Unit: "degrees"}),
		sheetEpisode(4, "P1", rules.SignalLost, rules.Act, sheetAt-4000, sheetAt-3000),
		sheetEpisode(5, "L1", rules.ThermistorBad, rules.Act, sheetAt-900, sheetAt-300),
	}
	checks := []fault.Check{{Episode: "5", Instrument: "L1", Kind: rules.ThermistorBad, At: sheetAt - 300, Unit: "K", Before: 6.2, After: 0.3, N: 30, Outcome: fault.CheckWorked}}
	s, ok := SheetStationOf("moor", list, checks, sheetAt)
	if !ok || len(s.Lines) != 4 {
		t.Fatalf("%+v", s)
	}
	var order []string
	for _, l := range s.Lines {
		order = append(order, l.Instrument+" "+l.Kind)
	}
	if got := strings.Join(order, ", "); got != "G1 sensor_tilted, G1 sensitivity_drift, D1 dome_soiled, L1 thermistor_bad" {
		t.Errorf("order: %s", got)
	}
	var text bytes.Buffer
	sheet := Sheet{Until: "2026-06-14T01:20:00Z", Asked: 3, Stations: []SheetStation{s}}
	if err := sheet.Write(&text); err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{
		"1 of 3 stations, 2026-06-14T01:20:00Z\nmoor\n",
		"  G1: out of level since 10 Jun 14:00, 2.8 degrees towards 240. Level it by its bubble with the feet, check the screws and the mast, then note the time. Take a spirit level, the key for the feet, a camera. Working at height: local rules, qualified people.\n",
		"-2.6 % in 30 days",
		"D1: suspected: dome soiled since",
		"Repair worked: off by 6.2 K before, 0.3 K after, over 30 minutes.\n",
	} {
		if !strings.Contains(text.String(), want) {
			t.Errorf("the sheet lacks %q:\n%s", want, text.String())
		}
	}
	for i := range 9 {
		list = append(list, sheetEpisode(10+i, "R1", rules.Noise, rules.Act, sheetAt-int64(100*i)-100, open))
	}
	if s, _ = SheetStationOf("moor", list, checks, sheetAt); len(s.Lines) != sheetLines || s.More != 8 {
		t.Errorf("%d lines and %d more", len(s.Lines), s.More)
	}
}

// Quiet when all is well: one line.
func TestTheMorningSheetIsQuiet(t *testing.T) {
	over := []fault.Episode{sheetEpisode(4, "P1", rules.SignalLost, rules.Act, sheetAt-400, sheetAt-300)}
	if s, ok := SheetStationOf("moor", over, nil, sheetAt); ok {
		t.Errorf("%+v", s)
	}
	var text bytes.Buffer
	sheet := Sheet{Until: "2026-06-14T01:20:00Z", Asked: 1}
	if err := sheet.Write(&text); err != nil || text.String() != "all is well: nothing open at 1 station, 2026-06-14T01:20:00Z\n" {
		t.Errorf("%q, %v", text.String(), err)
	}
}

// A repair that did not work stands where the fault would stand were it open, with what to do.
func TestARepairThatDidNotWorkComesFirst(t *testing.T) {
	list := []fault.Episode{
		sheetEpisode(1, "D1", rules.DomeSoiled, rules.Act, sheetAt-7000, fault.Open),
		sheetEpisode(2, "G1", rules.SensorTilted, rules.Act, sheetAt-5000, sheetAt-200, fault.Evidence{Name: "before_its_end", Value: 0.103, Unit: "1"},
			fault.Evidence{Name: "after_its_end", Value: 0.055, Unit: "1"}),
	}
	s, ok := SheetStationOf("moor", list, nil, sheetAt)
	if !ok || len(s.Lines) != 2 || s.Lines[0].Kind != "sensor_tilted" || s.Lines[0].Repair != "did not" || s.Lines[0].Do == "" {
		t.Errorf("%+v", s)
	}
}
