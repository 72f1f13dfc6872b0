package daemon

import (
	"context"
	"encoding/json"
	"net/http"
	"strings"
	"testing"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// A note given to the running daemon changes the rows of its minutes and is in the archive; one about nothing the site has is set aside.
func TestANoteReachesTheArchive(t *testing.T) {
	c, clock := testConfig(t)
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	eventually(t, "ready", func() bool { code, _ := get(t, d, "/-/ready"); return code == http.StatusOK })
	send(t, d, "northmoor", `[{"t":"2026-06-21T11:58:00Z","x":{"ghi":801}},{"t":"2026-06-21T11:59:00Z","x":{"ghi":802}}]`, true)
	clock.set(noon.Add(30 * time.Second))
	for _, instrument := range []string{"G1", "G7"} {
		n := rules.Note{Station: "northmoor", Instrument: instrument, Kind: rules.Override, Verdict: "rejected", From: noon.Add(-2 * time.Minute),
			To: noon.Add(-time.Minute), By: "A. Keeper", Text: "a hat on the dome", Made: noon}
		if err := n.Seal(); err != nil {
			t.Fatal(err)
		}
		text, err := json.Marshal(&n)
		if err != nil {
			t.Fatal(err)
		}
		if err := d.broker.PublishChange(context.Background(), broker.PartitionOf("northmoor"), text); err != nil {
			t.Fatal(err)
		}
	}
	eventually(t, "both notes read", func() bool {
		clock.set(clock.Now().Add(time.Second))
		_, text := get(t, d, "/metrics")
		return strings.Contains(text, "fluxwarden_worker_notes_total 1\n") && strings.Contains(text, `fluxwarden_worker_set_aside_readings_total{reason="note"} 1`)
	})
	if err := d.Stop(); err != nil {
		t.Fatal(err)
	}
	a, err := store.Open(vfs.OS{}, c.Settings.Archive)
	if err != nil {
		t.Fatal(err)
	}
	notes, err := a.Notes("northmoor")
	if err != nil || len(notes) != 1 || notes[0].Text != "a hat on the dome" {
		t.Fatalf("notes %v, %v", notes, err)
	}
	if d, err = Start(context.Background(), c); err != nil { // a day that was still owed is judged now
		t.Fatal(err)
	}
	clock.set(clock.Now().Add(time.Hour))
	eventually(t, "nothing owed", func() bool {
		clock.set(clock.Now().Add(time.Second))
		_, text := get(t, d, "/metrics")
		return strings.Contains(text, "fluxwarden_worker_owed 0\n") && strings.Contains(text, "fluxwarden_ready 1\n")
	})
	if err := d.Stop(); err != nil {
		t.Fatal(err)
	}
	if a, err = store.Open(vfs.OS{}, c.Settings.Archive); err != nil {
		t.Fatal(err)
	}
	verdicts := ""
	err = a.ReadMinutes("northmoor", 0, 1<<32, []string{"time", "global_verdict", "global_reasons"}, func(r *store.Rows) error {
		for i := range r.Rows {
			if v := r.Find("global_verdict"); v.Dict[v.Codes[i]] != "absent" {
				w := r.Find("global_reasons")
				verdicts += v.Dict[v.Codes[i]] + " " + w.Dict[w.Codes[i]] + "; "
			}
		}
		return nil
	})
	if err != nil || !strings.HasPrefix(verdicts, "rejected override; ") || strings.Contains(verdicts[18:], "override") {
		t.Errorf("%q, %v", verdicts, err)
	}
}
