package deploytest

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/http/httptest"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"fluxwarden/cmd/fluxwarden/daemon"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/synth"
	"fluxwarden/rules"
)

const stationText = `network: {id: test, name: Test network}
stations:
  - id: highnoon
    name: Highnoon
    latitude: 10
    longitude: %.3f
    elevation: 100
    time: {label: start, interval: 60s}
    instruments:
      - {id: G1, measures: global, class: A, input: {irradiance: ghi}}
      - {id: P1, measures: direct, class: A, input: {irradiance: dni}}
      - {id: D1, measures: diffuse, class: A, input: {irradiance: dhi}}
`

// A received is one alert in one message of Alertmanager.
type received struct{ status, name, instrument, fault string }

// A receiver is the people's end: a web server that keeps what it is told.
type receiver struct {
	mu  sync.Mutex
	all []received
}

func (r *receiver) ServeHTTP(_ http.ResponseWriter, req *http.Request) {
	var m struct {
		Alerts []struct {
			Status string
			Labels map[string]string
		}
	}
	body, _ := io.ReadAll(req.Body)
	if req.URL.Path != "/people" || json.Unmarshal(body, &m) != nil {
		return
	}
	r.mu.Lock()
	defer r.mu.Unlock()
	for _, a := range m.Alerts {
		r.all = append(r.all, received{a.Status, a.Labels["alertname"], a.Labels["instrument"], a.Labels["fault"]})
	}
}

func (r *receiver) count(status, name string) int {
	r.mu.Lock()
	defer r.mu.Unlock()
	n := 0
	for _, a := range r.all {
		if a.status == status && a.name == name {
			n++
		}
	}
	return n
}

func eventually(t *testing.T, what string, f func() bool) {
	t.Helper()
	for began := time.Now(); time.Since(began) < 4*time.Minute; time.Sleep(100 * time.Millisecond) {
		if f() {
			return
		}
	}
	t.Fatalf("not within four minutes: %s", what)
}

func freeAddress(t *testing.T) string {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	return l.Addr().String()
}

// launch runs a program until the test ends.
func launch(t *testing.T, dir string, command ...string) {
	t.Helper()
	cmd := exec.Command(command[0], command[1:]...)
	var out bytes.Buffer
	cmd.Dir, cmd.Stdout, cmd.Stderr = dir, &out, &out
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = cmd.Process.Signal(syscall.SIGTERM)
		_ = cmd.Wait()
		if t.Failed() {
			t.Logf("%s:\n%s", command[0], out.String())
		}
	})
}

func put(t *testing.T, path, text string) {
	t.Helper()
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
}

// A station's readings, as its logger would send them.
type feed struct {
	*synth.Station
	d    *daemon.Daemon
	next minute.Stamp
}

func (f *feed) sendUntil(t *testing.T, end time.Time) {
	t.Helper()
	for to := minute.Stamp(end.UnixMicro()); f.next+f.Interval() <= to; {
		var some []minute.Reading
		for ; len(some) < 200 && f.next+f.Interval() <= to; f.next += f.Interval() {
			some = append(some, f.Reading(f.next))
		}
		eventually(t, "a group of readings is taken", func() bool {
			a, err := f.d.Take(context.Background(), "highnoon", wire.EncodeJSON(nil, some))
			if err == nil && !a.OK && !a.Retry {
				t.Fatalf("refused: %+v", a)
			}
			return err == nil && a.OK
		})
	}
}

func page(d *daemon.Daemon, path string) string {
	resp, err := http.Get("http://" + d.Address() + path)
	if err != nil {
		return ""
	}
	defer resp.Body.Close()
	text, _ := io.ReadAll(resp.Body)
	return string(text)
}

// From a broken cable to a person and back, with the real Prometheus and Alertmanager: a fault is one message, its end is one. Minutes
// in the rules and in the routing are made seconds, so that the test need not wait; nothing else in them is changed.
func TestAFaultIsOneMessageAndItsEndOne(t *testing.T) {
	if os.Getenv("FLUXWARDEN_TOOLS") != "must" {
		t.Skip("starts Prometheus and Alertmanager: only with FLUXWARDEN_TOOLS=must, as in CI")
	}
	prometheus, alertmanager := tool(t, "prometheus", "prometheus"), tool(t, "prometheus-alertmanager", "prometheus-alertmanager")
	now := time.Now().UTC()
	longitude := 15 * (12 - float64(now.Hour()) - float64(now.Minute())/60) // where it is noon now: a lost signal shows by day
	text := fmt.Sprintf(stationText, longitude)
	site, err := rules.Parse("site.yaml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	s := daemon.DefaultSettings()
	s.Archive, s.Listen, s.DiskFloor = filepath.Join(dir, "archive"), "127.0.0.1:0", 1
	s.Broker.Store, s.Broker.Listen, s.Broker.Journal = filepath.Join(dir, "journal"), "none", 64<<20
	s.Broker.Refused, s.Broker.Findings = 8<<20, 8<<20
	d, err := daemon.Start(context.Background(), daemon.Config{Settings: s, Site: site, SiteText: []byte(text), Program: "test"})
	if err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	eventually(t, "ready", func() bool { return d.NotReady() == "" })

	people := &receiver{}
	hook := httptest.NewServer(people)
	defer hook.Close()
	seconds := regexp.MustCompile(`\b(\d+)m\b`)
	alertAddress, promAddress := freeAddress(t), freeAddress(t)
	put(t, filepath.Join(dir, "fluxwarden.rules.yaml"), seconds.ReplaceAllString(read(t, "alerts", "fluxwarden.rules.yaml"), "${1}s"))
	put(t, filepath.Join(dir, "prometheus.yaml"), strings.NewReplacer("interval: 30s", "interval: 1s", "127.0.0.1:9093", alertAddress, "127.0.0.1:9470", d.Address()).
		Replace(read(t, "alerts", "prometheus.yaml")))
	routing := strings.NewReplacer("group_wait: 30s", "group_wait: 1s", "http://127.0.0.1:9480", hook.URL).Replace(read(t, "alerts", "alertmanager.yaml"))
	put(t, filepath.Join(dir, "alertmanager.yaml"), seconds.ReplaceAllString(routing, "${1}s"))
	launch(t, dir, alertmanager, "--config.file=alertmanager.yaml", "--storage.path=alerts", "--web.listen-address="+alertAddress, "--cluster.listen-address=")
	launch(t, dir, prometheus, "--config.file=prometheus.yaml", "--storage.tsdb.path=metrics", "--web.listen-address="+promAddress)

	broken, mended := now.Add(-30*time.Minute).Truncate(time.Minute), now.Add(-10*time.Minute).Truncate(time.Minute)
	f := &feed{Station: synth.New(&site.Stations[0], 1, synth.Desert), d: d}
	if err := f.AddFault(synth.Fault{Kind: rules.SignalLost, Instrument: "G1", From: minute.Stamp(broken.UnixMicro()), To: minute.Stamp(mended.UnixMicro())}); err != nil {
		t.Fatal(err)
	}
	f.next = minute.Stamp(now.Add(-6 * time.Hour).Truncate(time.Minute).UnixMicro())
	f.sendUntil(t, mended)
	open := func() bool {
		return strings.Contains(page(d, "/metrics"), `fluxwarden_fault_open{fault="signal_lost",instrument="G1",severity="act"`)
	}
	eventually(t, "the fault is open", open)
	eventually(t, "a message", func() bool { return people.count("firing", "FluxwardenFault") > 0 })
	if n := people.count("resolved", "FluxwardenFault"); n != 0 {
		t.Errorf("%d ends told while the fault is open", n)
	}
	f.sendUntil(t, time.Now())
	eventually(t, "the fault has ended", func() bool { f.sendUntil(t, time.Now()); return !open() })
	eventually(t, "its end is told", func() bool { return people.count("resolved", "FluxwardenFault") > 0 })
	people.mu.Lock()
	defer people.mu.Unlock()
	var told []received
	for _, a := range people.all {
		if a.name == "FluxwardenFault" || a.name == "FluxwardenStationSilent" || a.name == "FluxwardenManySilent" {
			told = append(told, a)
		}
	}
	want := []received{{"firing", "FluxwardenFault", "G1", "signal_lost"}, {"resolved", "FluxwardenFault", "G1", "signal_lost"}}
	if len(told) != 2 || told[0] != want[0] || told[1] != want[1] {
		t.Errorf("told %v, want %v", told, want)
	}
	t.Logf("all messages: %v", people.all)
}
