package main

import (
	"bytes"
	"context"
	"encoding/json"
	"io"
	"net/http"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"fluxwarden/cmd/fluxwarden/daemon"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// A fault in the demo is seen by everybody who looks: in the terminal, in /metrics, on the morning sheet of the daemon, in the stream FINDINGS,
// and in the archive. It is one episode everywhere.
func TestAFaultOfTheDemoIsSeenEverywhere(t *testing.T) {
	if testing.Short() {
		t.Skip("a demo of some seconds is left out of short tests")
	}
	t.Setenv("TMPDIR", t.TempDir())
	archive := filepath.Join(t.TempDir(), "archive")
	d, err := startDemo(demoOptions{speed: 1800, archive: archive, seed: 1, listen: "127.0.0.1:0"})
	if err != nil {
		t.Fatal(err)
	}
	var terminal bytes.Buffer
	screen := newDemoScreen(d)
	screen.out, screen.live = &terminal, false
	screen.begin()

	// Station time goes on by a minute at a time until the terminal has said it: 24 minutes until the fault begins, ten until it is sure.
	ctx, cancel := context.WithTimeout(context.Background(), 2*time.Minute)
	defer cancel()
	beat := time.NewTicker(20 * time.Millisecond)
	defer beat.Stop()
	said := func() bool { return strings.Contains(terminal.String(), "larkmoor P1: signal lost since 21 Jun 00:2") }
	for ctx.Err() == nil && !said() {
		if d.clock.at() < minute.Stamp(demoBegins.UnixMicro())+120*minute.MicrosPerMinute { // the fault lasts longer
			if err := d.senders.sendUntil(ctx, d.clock.at()+minute.MicrosPerMinute); err != nil {
				t.Fatal(err)
			}
		}
		screen.drawn = time.Time{}
		screen.update()
		<-beat.C
	}
	if !said() {
		t.Errorf("the terminal does not name the lost signal:\n%s", terminal.String())
	}
	if text := pageOf(t, "http://"+d.daemon.Address()+"/metrics"); !strings.Contains(text, `fluxwarden_fault_open{fault="signal_lost",instrument="P1",severity="act",station="larkmoor"} 1`) {
		t.Errorf("/metrics does not show it:\n%s", text)
	}
	sheet, err := askSheet("http://"+d.daemon.Address(), "larkmoor")
	if err != nil || len(sheet.Stations) != 1 || len(sheet.Stations[0].Lines) != 1 || sheet.Stations[0].Lines[0].Kind != "signal_lost" {
		t.Errorf("the morning sheet: %+v, %v", sheet, err)
	}
	finding := findingOf(t, ctx, d, "larkmoor")
	if finding.Kind != "signal_lost" || finding.Instrument != "P1" || finding.Severity != "act" || finding.Advice == "" {
		t.Errorf("FINDINGS says %+v", finding)
	}
	if code := d.finish(screen, nil); code != exitOK {
		t.Fatalf("the demo ended with exit code %d", code)
	}
	a, err := store.Open(vfs.OS{}, archive)
	if err != nil {
		t.Fatal(err)
	}
	episodes, err := a.Faults("larkmoor")
	if err != nil {
		t.Fatal(err)
	}
	var kept []fault.Episode
	for _, e := range episodes {
		if e.Kind == rules.SignalLost && e.Instrument == "P1" {
			kept = append(kept, e)
		}
	}
	if len(kept) != 1 || kept[0].ID != finding.ID || !minuteTime(kept[0].From).Equal(finding.From) {
		t.Errorf("the archive has %+v, FINDINGS said %+v", kept, finding)
	}
}

func pageOf(t *testing.T, address string) string {
	t.Helper()
	answer, err := http.Get(address)
	if err != nil {
		t.Fatal(err)
	}
	defer answer.Body.Close()
	text, err := io.ReadAll(answer.Body)
	if err != nil || answer.StatusCode != http.StatusOK {
		t.Fatalf("%s: %s, %v", address, answer.Status, err)
	}
	return string(text)
}

// findingOf is the last that the stream FINDINGS has of a station; it may come a little after the terminal.
func findingOf(t *testing.T, ctx context.Context, d *demo, station string) daemon.FindingLine {
	t.Helper()
	stream, err := d.senders.link.JS.Stream(ctx, "FINDINGS")
	if err != nil {
		t.Fatal(err)
	}
	beat := time.NewTicker(20 * time.Millisecond)
	defer beat.Stop()
	for ctx.Err() == nil {
		if m, err := stream.GetLastMsgForSubject(ctx, "findings."+station); err == nil {
			var line daemon.FindingLine
			if err := json.Unmarshal(m.Data, &line); err != nil {
				t.Fatalf("%s: %v", m.Data, err)
			}
			return line
		}
		<-beat.C
	}
	t.Fatal("FINDINGS has nothing of " + station)
	return daemon.FindingLine{}
}
