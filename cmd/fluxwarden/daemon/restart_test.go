package daemon

import (
	"context"
	"net/http"
	"strings"
	"testing"
	"time"
)

// A fault that was open before a restart is open after it, though nothing has changed since.
func TestOpenFaultsAreShownAfterARestart(t *testing.T) {
	c, clock := testConfig(t)
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	eventually(t, "ready", func() bool { code, _ := get(t, d, "/-/ready"); return code == http.StatusOK })
	send(t, d, "northmoor", `[{"t":"2026-06-21T11:58:00Z","x":{"ghi":801}},{"t":"2026-06-21T11:59:00Z","x":{"ghi":802}}]`, true)
	const series = `fluxwarden_fault_open{fault="data_gap",instrument="logger",severity="act",station="northmoor"} 1`
	shown := func() bool { _, text := get(t, d, "/metrics"); return strings.Contains(text, series) }
	clock.set(noon.Add(30 * time.Second))
	eventually(t, "a judged minute", func() bool { _, text := get(t, d, "/"); return strings.Contains(text, "11:59Z") })
	clock.set(noon.Add(2 * time.Hour))
	eventually(t, "a gap", shown)
	if err := d.Stop(); err != nil {
		t.Fatal(err)
	}
	if d, err = Start(context.Background(), c); err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	eventually(t, "the gap after the restart", shown)
	eventually(t, "the last minute after the restart", func() bool {
		_, text := get(t, d, "/metrics")
		return strings.Contains(text, `fluxwarden_station_lag_seconds{station="northmoor"} 7`)
	})
}
