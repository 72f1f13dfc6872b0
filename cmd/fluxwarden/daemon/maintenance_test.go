package daemon

import (
	"context"
	"net/http"
	"strings"
	"testing"
	"time"

	"fluxwarden/rules"
)

// Noted work shows in the metric that alerts are held by, also after a restart, and goes with the work's end.
func TestNotedWorkHoldsAlerts(t *testing.T) {
	c, clock := testConfig(t)
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	eventually(t, "ready", func() bool { code, _ := get(t, d, "/-/ready"); return code == http.StatusOK })
	send(t, d, "northmoor", `[{"t":"2026-06-21T11:58:00Z","x":{"ghi":801}},{"t":"2026-06-21T11:59:00Z","x":{"ghi":802}}]`, true)
	n := rules.Note{Station: "northmoor", Kind: rules.Maintenance, From: noon, To: noon.Add(time.Hour), By: "A. Keeper", Text: "mast painted", Made: noon}
	if err := n.Seal(); err != nil {
		t.Fatal(err)
	}
	if err := d.keepNote(context.Background(), &n); err != nil {
		t.Fatal(err)
	}
	clock.set(noon.Add(30 * time.Second))
	eventually(t, "the note read", func() bool {
		clock.set(clock.Now().Add(time.Second))
		_, text := get(t, d, "/metrics")
		return strings.Contains(text, "fluxwarden_worker_notes_total 1\n")
	})
	if err := d.Stop(); err != nil {
		t.Fatal(err)
	}
	if d, err = Start(context.Background(), c); err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	shown := func() bool {
		_, text := get(t, d, "/metrics")
		return strings.Contains(text, `fluxwarden_station_maintenance{station="northmoor"} 1`)
	}
	eventually(t, "work shown", shown)
	clock.set(noon.Add(2 * time.Hour))
	d.lookAtNotes()
	if shown() {
		t.Error("the work is shown after its end")
	}
}
