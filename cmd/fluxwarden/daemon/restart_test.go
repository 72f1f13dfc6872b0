package daemon

import (
	"context"
	"fmt"
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
	var readings []string
	for m := range 120 {
		readings = append(readings, fmt.Sprintf(`{"t":"%s","x":{"ghi":801.5}}`, noon.Add(time.Duration(m-120)*time.Minute).Format(time.RFC3339)))
	}
	send(t, d, "northmoor", "["+strings.Join(readings, ",")+"]", true)
	clock.set(noon.Add(30 * time.Second))
	const series = `fluxwarden_fault_open{fault="signal_frozen",instrument="G1",severity="act",station="northmoor"} 1`
	shown := func() bool { _, text := get(t, d, "/metrics"); return strings.Contains(text, series) }
	eventually(t, "a frozen signal", shown)
	if err := d.Stop(); err != nil {
		t.Fatal(err)
	}
	if d, err = Start(context.Background(), c); err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	eventually(t, "the frozen signal after the restart", shown)
	eventually(t, "the last minute after the restart", func() bool {
		_, text := get(t, d, "/metrics")
		return strings.Contains(text, `fluxwarden_station_lag_seconds{station="northmoor"} 30`)
	})
}
