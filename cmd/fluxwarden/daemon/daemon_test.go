package daemon

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/gate"
	"fluxwarden/qc/engine"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

const siteText = `network: {id: test, name: Test network}
stations:
  - id: northmoor
    name: Northmoor
    latitude: 57.121
    longitude: -3.642
    elevation: 640
    time: {label: start, interval: 60s}
    instruments:
      - {id: G1, measures: global, class: A, input: {irradiance: ghi}}
`

// A handClock stands still until it is moved.
type handClock struct {
	mu sync.Mutex
	at time.Time
}

func (c *handClock) Now() time.Time {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.at
}

func (c *handClock) set(at time.Time) {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.at = at
}

var noon = time.Date(2026, 6, 21, 12, 0, 0, 0, time.UTC)

func testConfig(t *testing.T) (Config, *handClock) {
	t.Helper()
	site, err := rules.Parse("site.yaml", []byte(siteText))
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	s := DefaultSettings()
	s.Archive, s.Listen, s.DiskFloor = filepath.Join(dir, "archive"), "127.0.0.1:0", 1
	s.Broker.Store, s.Broker.Listen = filepath.Join(dir, "journal"), "none"
	s.Broker.Journal, s.Broker.Refused, s.Broker.Findings = 32<<20, 8<<20, 8<<20
	clock := &handClock{at: noon}
	return Config{Settings: s, Site: site, SiteText: []byte(siteText), Clock: clock, Program: "test", CommitAtStop: true}, clock
}

func get(t *testing.T, d *Daemon, path string) (int, string) {
	t.Helper()
	resp, err := http.Get("http://" + d.Address() + path)
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	body, err := io.ReadAll(resp.Body)
	if err != nil {
		t.Fatal(err)
	}
	return resp.StatusCode, string(body)
}

// eventually polls for what other goroutines bring about.
func eventually(t *testing.T, what string, f func() bool) {
	t.Helper()
	for began := time.Now(); time.Since(began) < 20*time.Second; time.Sleep(5 * time.Millisecond) {
		if f() {
			return
		}
	}
	t.Fatalf("not within 20 s: %s", what)
}

// A reading sent through the front door becomes a judged minute, live and in the archive.
func TestFromReadingToArchive(t *testing.T) {
	c, clock := testConfig(t)
	minutes := make(chan int, 100)
	c.OnMinutes = func(_ *engine.Judged, from, to int) { minutes <- to - from }
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	eventually(t, "ready", func() bool { code, _ := get(t, d, "/-/ready"); return code == http.StatusOK })
	send(t, d, "northmoor", `[{"t":"2026-06-21T11:58:00Z","x":{"ghi":801}},{"t":"2026-06-21T11:59:00Z","x":{"ghi":802}}]`, true)
	send(t, d, "elsewhere", `{"t":"2026-06-21T11:58:00Z","x":{"ghi":801}}`, false)
	clock.set(noon.Add(30 * time.Second))
	got := 0
	for got < 1 {
		select {
		case n := <-minutes:
			got += n
		case <-time.After(20 * time.Second):
			t.Fatal("no judged minute within 20 s")
		}
	}
	eventually(t, "the last minute on the console", func() bool { _, page := get(t, d, "/"); return strings.Contains(page, "2026-06-21 11:59Z") })
	_, text := get(t, d, "/metrics")
	for _, want := range []string{`fluxwarden_gate_refused_readings_total{reason="unknown_station"} 1`, `fluxwarden_station_last_minute_timestamp_seconds{station="northmoor"}`,
		"fluxwarden_worker_readings_total 2", "fluxwarden_build_info"} {
		if !strings.Contains(text, want) {
			t.Errorf("metrics have no %s", want)
		}
	}
	began := time.Now()
	if err := d.Stop(); err != nil {
		t.Fatal(err)
	}
	if took := time.Since(began); took > 5*time.Second {
		t.Errorf("stopping took %v", took)
	}
	a, err := store.Open(vfs.OS{}, c.Settings.Archive)
	if err != nil {
		t.Fatal(err)
	}
	rows := 0
	if err := a.ReadMinutes("northmoor", 0, 1<<32, nil, func(r *store.Rows) error { rows += r.Rows; return nil }); err != nil {
		t.Fatal(err)
	}
	if rows != 720 {
		t.Errorf("the archive has %d minutes of the open day, want 720: midnight to 11:59", rows)
	}
}

func send(t *testing.T, d *Daemon, station, payload string, ok bool) {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
	defer cancel()
	m, err := d.broker.Conn.RequestWithContext(ctx, gate.SubjectPrefix+station, []byte(payload))
	if err != nil {
		t.Fatal(err)
	}
	var reply gate.Reply
	if err := json.Unmarshal(m.Data, &reply); err != nil || reply.OK != ok {
		t.Fatalf("reply %s, %v", m.Data, err)
	}
}

// A new rule set holds from the next UTC day on; a wrong one is refused whole; both outlive a restart.
func TestReload(t *testing.T) {
	c, clock := testConfig(t)
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	today := noon.Unix() / 86400
	old := d.rules.PlanFor("northmoor", today).Station.Digest
	if err := d.Reload(nil, nil, errors.New("site.yaml:3: latitude of 91")); err == nil {
		t.Error("a wrong site file was taken")
	}
	changed := strings.Replace(siteText, "elevation: 640", "elevation: 700", 1)
	site, err := rules.Parse("site.yaml", []byte(changed))
	if err != nil {
		t.Fatal(err)
	}
	if err := d.Reload(site, []byte(changed), nil); err != nil {
		t.Fatal(err)
	}
	check := func(d *Daemon) {
		t.Helper()
		if got := d.rules.PlanFor("northmoor", today).Station.Digest; got != old {
			t.Error("the rules of a day that has begun have changed")
		}
		if got := d.rules.PlanFor("northmoor", today+1).Station.Digest; got == old {
			t.Error("the new rules do not hold on the next day")
		}
	}
	check(d)
	if err := d.Stop(); err != nil {
		t.Fatal(err)
	}
	clock.set(noon.Add(72 * time.Hour))
	c.Site, c.SiteText = site, []byte(changed)
	d, err = Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	check(d)
}

// What cannot be started says what is wrong and how to mend it.
func TestUnusableSurroundings(t *testing.T) {
	c, _ := testConfig(t)
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	for _, x := range []struct {
		name, want string
		change     func(c *Config)
	}{
		{"archive in use", "only one program", func(o *Config) { o.Settings.Archive = c.Settings.Archive }},
		{"port in use", "port is in use", func(o *Config) { o.Settings.Listen = d.Address() }},
		{"broker's port in use", "port is in use", func(o *Config) { o.Settings.Broker.Listen = d.Address() }},
		{"journal in use", "store directory", func(o *Config) { o.Settings.Broker.Store = c.Settings.Broker.Store }},
		{"archive is a file", "archive", func(o *Config) { o.Settings.Archive = filepath.Join(c.Settings.Archive, "archive.json") }},
		{"no grace", "grace", func(o *Config) { o.Settings.Grace = 0 }},
	} {
		t.Run(x.name, func(t *testing.T) {
			o, _ := testConfig(t)
			x.change(&o)
			other, err := Start(context.Background(), o)
			if err == nil {
				other.Stop()
				t.Fatal("it started")
			}
			if !strings.Contains(err.Error(), x.want) {
				t.Errorf("%v: does not say %q", err, x.want)
			}
		})
	}
}

// A daemon whose broker is down starts, says that it is not ready, and goes to work when the broker comes.
func TestBrokerComesLate(t *testing.T) {
	ctx := context.Background()
	first, err := broker.StartEmbedded(ctx, broker.EmbeddedSettings{StoreDir: t.TempDir(), StoreBytes: 1 << 30, Listen: true})
	if err != nil {
		t.Fatal(err)
	}
	url := first.URL()
	first.Stop()
	c, _ := testConfig(t)
	c.Settings.Broker.URL = url
	d, err := Start(ctx, c)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	if code, _ := get(t, d, "/-/healthy"); code != http.StatusOK {
		t.Errorf("healthy is %d", code)
	}
	if code, text := get(t, d, "/-/ready"); code != http.StatusServiceUnavailable || !strings.Contains(text, "broker") {
		t.Errorf("ready is %d, %s", code, text)
	}
	_, port, err := splitAddress(strings.TrimPrefix(url, "nats://"))
	if err != nil {
		t.Fatal(err)
	}
	second, err := broker.StartEmbedded(ctx, broker.EmbeddedSettings{StoreDir: t.TempDir(), StoreBytes: 1 << 30, Listen: true, Port: port})
	if err != nil {
		t.Fatal(err)
	}
	defer second.Stop()
	eventually(t, "ready once the broker is there", func() bool { code, _ := get(t, d, "/-/ready"); return code == http.StatusOK })
	send(t, d, "northmoor", `{"t":"2026-06-21T11:58:00Z","x":{"ghi":801}}`, true)
}

func TestSettings(t *testing.T) {
	file := func(text string) string {
		name := filepath.Join(t.TempDir(), "fluxwarden.yaml")
		if err := os.WriteFile(name, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		return name
	}
	s, err := LoadSettings(file("archive: /srv/a\ngrace: 20s\nbroker: {journal: 1.5GiB}\n"))
	if err != nil || s.Archive != "/srv/a" || time.Duration(s.Grace) != 20*time.Second || s.Broker.Journal != 3<<29 {
		t.Errorf("%+v, %v", s, err)
	}
	if back, err := LoadSettings(file(s.Example())); err != nil || back != s {
		t.Errorf("what is printed does not read back: %+v, %v", back, err)
	}
	for text, want := range map[string]string{
		"archiv: x\n":              "line 1",
		"grace: 20\n":              "with its unit",
		"broker: {journal: 5}\n":   "with its unit",
		"broker:\n  journal: 5B\n": "at least 1MiB",
		"commit_every: 1ms\n":      "1s to 24h",
		"archive: [\n":             "line",
	} {
		if _, err := LoadSettings(file(text)); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: %v does not say %q", text, err, want)
		}
	}
	for _, size := range []Size{0, 1, 1024, 5 << 20, 3 << 30, 1<<40 + 1} {
		if back, err := ParseSize(fmt.Sprint(size)); err != nil || back != size {
			t.Errorf("%d is written %v and read %d, %v", int64(size), size, int64(back), err)
		}
	}
}
