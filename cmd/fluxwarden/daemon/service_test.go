package daemon

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/http/httptest"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"fluxwarden/cmd/fluxwarden/notify"
	"fluxwarden/ingest/gate"
)

// A manager is a service manager's end of sd_notify(3).
type manager struct {
	mu   sync.Mutex
	told []string
}

func listenAsManager(t *testing.T) *manager {
	t.Helper()
	path := filepath.Join(t.TempDir(), "notify")
	conn, err := net.ListenUnixgram("unixgram", &net.UnixAddr{Name: path, Net: "unixgram"})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { conn.Close() })
	t.Setenv("NOTIFY_SOCKET", path)
	t.Setenv("STATE_DIRECTORY", t.TempDir())
	m := &manager{}
	go func() {
		buf := make([]byte, 4096)
		for {
			n, err := conn.Read(buf)
			if err != nil {
				return
			}
			m.mu.Lock()
			m.told = append(m.told, string(buf[:n]))
			m.mu.Unlock()
		}
	}()
	return m
}

func (m *manager) count(what string) int {
	m.mu.Lock()
	defer m.mu.Unlock()
	n := 0
	for _, s := range m.told {
		n += strings.Count(s, what)
	}
	return n
}

// The watchdog hears from a worker that goes on, and not from one that is stuck.
func TestWatchdogIsFedByProgress(t *testing.T) {
	m := listenAsManager(t)
	c, _ := testConfig(t)
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	d.AwaitReplay(context.Background(), Notify)
	eventually(t, "a ping", func() bool { d.tellManager(); return m.count("WATCHDOG=1") > 0 })
	eventually(t, "words", func() bool { d.tellManager(); return m.count("STATUS=readings are taken") > 0 })
	if err := d.Stop(); err != nil {
		t.Fatal(err)
	}
	eventually(t, "stopping", func() bool { return m.count("STOPPING=1") == 1 })
	pings := m.count("WATCHDOG=1")
	d.working.Store(true)
	d.progress.Store(time.Now().Add(-2 * stuckAfter).UnixNano()) // as if its last step had not returned
	d.tellManager()
	Notify("END=1")
	eventually(t, "the end", func() bool { return m.count("END=1") == 1 })
	if got := m.count("WATCHDOG=1"); got != pings {
		t.Errorf("a stuck worker pinged %d times", got-pings)
	}
}

// While the journal is read the manager is asked for time, as long as reading goes on; with an external broker it is not waited for.
func TestMoreTimeIsAskedWhileTheJournalIsRead(t *testing.T) {
	told := 0
	tell := func(s string) {
		if strings.Contains(s, fmt.Sprintf("EXTEND_TIMEOUT_USEC=%d", 30_000_000)) {
			told++
		}
	}
	c, _ := testConfig(t)
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	eventually(t, "caught up", d.caughtUp.Load)
	external := &Daemon{}
	external.AwaitReplay(context.Background(), tell)
	if told != 0 {
		t.Error("an external broker is waited for")
	}
	reading := &Daemon{embedded: d.embedded}
	reading.progress.Store(time.Now().UnixNano())
	ctx, cancel := context.WithCancel(context.Background())
	reading.AwaitReplay(ctx, func(s string) { tell(s); cancel() })
	if told != 1 {
		t.Errorf("asked for time %d times", told)
	}
	reading.progress.Store(time.Now().Add(-2 * replayStill).UnixNano())
	reading.AwaitReplay(context.Background(), tell) // stuck: it returns at once
	if told != 1 {
		t.Error("time was asked for while nothing went on")
	}
}

// Before 2020 no clock is set: it is said, counted, and no reading is taken until it is.
func TestAClockThatIsNotSet(t *testing.T) {
	c, clock := testConfig(t)
	clock.set(time.Date(1970, 1, 1, 0, 0, 9, 0, time.UTC))
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	eventually(t, "it says so", func() bool { _, text := get(t, d, "/-/ready"); return strings.Contains(text, "before 2020") })
	_, text := get(t, d, "/metrics")
	if !strings.Contains(text, `fluxwarden_failures_total{operation="clock"}`) || strings.Contains(text, `fluxwarden_failures_total{operation="clock"} 0`) {
		t.Error("it is not counted")
	}
	ctx, cancel := context.WithTimeout(context.Background(), 60*time.Second)
	defer cancel()
	msg, err := d.broker.Conn.RequestWithContext(ctx, gate.SubjectPrefix+"northmoor", []byte(`{"t":"2026-06-21T11:58:00Z","x":{"ghi":801}}`))
	if err != nil {
		t.Fatal(err)
	}
	var reply gate.Reply
	if err := json.Unmarshal(msg.Data, &reply); err != nil || reply.OK || !reply.Retry || reply.Reason != gate.ClockUnset {
		t.Errorf("reply %s, %v", msg.Data, err)
	}
	clock.set(noon)
	d.lookAtClock()
	send(t, d, "northmoor", `{"t":"2026-06-21T11:58:00Z","x":{"ghi":801}}`, true)
}

// A unit without a state directory is told what to write.
func TestAUnitWithoutItsStateDirectory(t *testing.T) {
	t.Setenv("NOTIFY_SOCKET", "/run/none")
	t.Setenv("STATE_DIRECTORY", "")
	c, _ := testConfig(t)
	c.Settings.Archive = DefaultSettings().Archive
	if d, err := Start(context.Background(), c); err == nil || !strings.Contains(err.Error(), "StateDirectory=fluxwarden") {
		if err == nil {
			d.Stop()
		}
		t.Errorf("got %v", err)
	}
}

// A reload changes the disk's floor and names what must wait; wrong settings change nothing.
func TestReloadOfSettings(t *testing.T) {
	c, _ := testConfig(t)
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	s := c.Settings
	s.DiskFloor = 1 << 60
	if err := d.ReloadSettings(s, nil); err != nil {
		t.Fatal(err)
	}
	if _, text := get(t, d, "/-/ready"); !strings.Contains(text, "disk") {
		t.Errorf("ready says %s", text)
	}
	s.Grace = 0
	if err := d.ReloadSettings(s, nil); err == nil {
		t.Error("wrong settings were taken")
	}
	s = c.Settings
	s.CommitEvery *= 2
	if err := d.ReloadSettings(s, nil); err == nil || !strings.Contains(err.Error(), "next start") {
		t.Errorf("got %v", err)
	}
	eventually(t, "ready again", func() bool { return d.NotReady() == "" })
}

// From a reading to a message: the daemon's own notifier tells of a fault once, also across a restart.
func TestTheDaemonTellsOfAFault(t *testing.T) {
	messages := make(chan notify.Message, 10)
	server := httptest.NewServer(http.HandlerFunc(func(_ http.ResponseWriter, r *http.Request) {
		var m notify.Message
		body, _ := io.ReadAll(r.Body)
		if json.Unmarshal(body, &m) == nil {
			messages <- m
		}
	}))
	defer server.Close()
	c, clock := testConfig(t)
	c.Settings.Notify = NotifySettings{Webhook: WebhookSettings{URL: server.URL}, Zone: "UTC", Sent: filepath.Join(t.TempDir(), "sent.jsonl")}
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	eventually(t, "ready", func() bool { return d.NotReady() == "" })
	var readings []string
	for m := range 120 {
		readings = append(readings, fmt.Sprintf(`{"t":"%s","x":{"ghi":801.5}}`, noon.Add(time.Duration(m-120)*time.Minute).Format(time.RFC3339)))
	}
	send(t, d, "northmoor", "["+strings.Join(readings, ",")+"]", true)
	clock.set(noon.Add(30 * time.Second))
	want := func(event, kind string) {
		t.Helper()
		select {
		case m := <-messages:
			if m.Event != event || m.Kind != kind {
				t.Fatalf("told %s of %s, want %s of %s", m.Event, m.Kind, event, kind)
			}
		case <-time.After(60 * time.Second):
			t.Fatalf("nothing told; want %s of %s", event, kind)
		}
	}
	want(notify.Raised, "signal_frozen")
	if err := d.Stop(); err != nil {
		t.Fatal(err)
	}
	if d, err = Start(context.Background(), c); err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	eventually(t, "ready", func() bool { return d.NotReady() == "" })
	readings = readings[:0]
	for m := range 60 {
		readings = append(readings, fmt.Sprintf(`{"t":"%s","x":{"ghi":%d}}`, noon.Add(time.Duration(m)*time.Minute).Format(time.RFC3339), 780+m%7*3))
	}
	clock.set(noon.Add(60 * time.Minute))
	send(t, d, "northmoor", "["+strings.Join(readings, ",")+"]", true)
	clock.set(noon.Add(61 * time.Minute))
	want(notify.Ended, "signal_frozen")
}

func TestNotifySettings(t *testing.T) {
	good := NotifySettings{Webhook: WebhookSettings{URL: "https://hooks.example.org/x"}, Zone: "Europe/Oslo", Quiet: "22:00-06:00", Morning: "06:30", Sent: "x"}
	if err := good.check(); err != nil {
		t.Error(err)
	}
	for want, change := range map[string]func(n *NotifySettings){
		"zone":    func(n *NotifySettings) { n.Zone = "Nowhere/Here" },
		"quiet":   func(n *NotifySettings) { n.Quiet = "22:00" },
		"morning": func(n *NotifySettings) { n.Morning = "half six" },
		"url":     func(n *NotifySettings) { n.Webhook.URL = "hooks" },
		"server":  func(n *NotifySettings) { n.Mail = MailSettings{Server: "mail", From: "a@b", To: "c@d"} },
		"from":    func(n *NotifySettings) { n.Mail = MailSettings{Server: "mail:25", From: "a", To: "c@d"} },
		"sent":    func(n *NotifySettings) { n.Sent = "" },
	} {
		n := good
		change(&n)
		if err := n.check(); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v", want, err)
		}
	}
	if _, err := secret(filepath.Join(t.TempDir(), "none"), "mail: password"); err == nil || !strings.Contains(err.Error(), "LoadCredential=") {
		t.Errorf("got %v", err)
	}
}
