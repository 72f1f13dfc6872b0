package main

import (
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"fluxwarden/qc/synth"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/export"
	"fluxwarden/store/vfs"
)

// A short demo goes the whole way: what it sent stands in the archive as judged minutes, and the first fault is found.
func TestDemoFillsAnArchive(t *testing.T) {
	if testing.Short() {
		t.Skip("a demo of some seconds is left out of short tests")
	}
	t.Setenv("TMPDIR", t.TempDir())
	archive := filepath.Join(t.TempDir(), "archive")
	if code := cmdDemo([]string{"--for", "5s", "--speed", "1800", "--archive", archive, "--listen", "127.0.0.1:0", "--seed", "1"}); code != exitOK {
		t.Fatalf("exit code %d", code)
	}
	a, err := store.Open(vfs.OS{}, archive)
	if err != nil {
		t.Fatal(err)
	}
	for _, station := range []string{"larkmoor", "redbasin", "whitecape"} {
		var text strings.Builder
		if _, err := export.CSV(&text, a, export.Request{Station: station, From: math.MinInt32, To: math.MaxInt32}); err != nil {
			t.Fatal(err)
		}
		if lines := strings.Count(text.String(), "\n"); lines < 30 {
			t.Errorf("%s: %d lines in the archive", station, lines)
		}
	}
	episodes, err := a.Faults("larkmoor")
	if err != nil {
		t.Fatal(err)
	}
	found := false
	for _, e := range episodes {
		found = found || e.Instrument == "P1" && e.Kind == rules.SignalLost
	}
	if !found {
		t.Errorf("the lost signal of larkmoor P1 is not among %v", episodes)
	}
}

func TestDemoRefuses(t *testing.T) {
	t.Setenv("TMPDIR", t.TempDir())
	full := t.TempDir()
	if err := os.WriteFile(filepath.Join(full, "mine.txt"), nil, 0o600); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		args []string
		code int
	}{
		{[]string{"--speed", "0"}, exitUsage},
		{[]string{"--speed", "NaN"}, exitUsage},
		{[]string{"--for", "-1s"}, exitUsage},
		{[]string{"extra"}, exitUsage},
		{[]string{"--archive", full, "--for", "1s"}, exitProblem},
	} {
		if code := cmdDemo(c.args); code != c.code {
			t.Errorf("%v: exit code %d, want %d", c.args, code, c.code)
		}
	}
}

// Every fault of the plan is one that its station can have, and the plan names no other station.
func TestDemoPlan(t *testing.T) {
	site, err := rules.Parse("demo_site.yaml", demoSite)
	if err != nil {
		t.Fatal(err)
	}
	if len(site.Warnings) > 0 {
		t.Errorf("the demo's site file: %v", site.Warnings)
	}
	for _, f := range demoFaults {
		st := site.Station(f.station)
		if st == nil {
			t.Fatalf("the plan names station %s", f.station)
		}
		s := synth.New(st, 1, demoClimates[f.station])
		if err := s.AddFault(synth.Fault{Kind: f.kind, Instrument: f.instrument, From: 0, To: 1, Amount: f.amount, TowardsDeg: f.towards}); err != nil {
			t.Error(err)
		}
		if f.afterMinutes+f.lastsMinutes > demoRoundDays*1440 {
			t.Errorf("%s %s is not over when its round is", f.station, f.kind)
		}
	}
}
