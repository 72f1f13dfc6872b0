package notify

import (
	"context"
	"encoding/json"
	"errors"
	"io"
	"net"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/emersion/go-smtp"

	"fluxwarden/qc/fault"
	"fluxwarden/rules"
)

// A way that keeps what it was given, and answers as it is told.
type fakeWay struct {
	mu     sync.Mutex
	got    []Message
	answer func(n int) error // of the nth try
	tries  int
}

func (f *fakeWay) Name() string { return "webhook" }

func (f *fakeWay) Send(_ context.Context, m *Message) error {
	f.mu.Lock()
	defer f.mu.Unlock()
	f.tries++
	if f.answer != nil {
		if err := f.answer(f.tries); err != nil {
			return err
		}
	}
	f.got = append(f.got, *m)
	return nil
}

func (f *fakeWay) keys() string {
	f.mu.Lock()
	defer f.mu.Unlock()
	var keys []string
	for _, m := range f.got {
		keys = append(keys, m.Key)
	}
	return strings.Join(keys, " ")
}

type meter struct {
	mu                    sync.Mutex
	sent, failed, givenUp int
}

func (m *meter) Notified(string) { m.mu.Lock(); m.sent++; m.mu.Unlock() }
func (m *meter) NotifyFailed(_ string, forGood bool) {
	m.mu.Lock()
	m.failed++
	if forGood {
		m.givenUp++
	}
	m.mu.Unlock()
}
func (m *meter) NotifyWaiting(int) {}
func (m *meter) counts() [3]int {
	m.mu.Lock()
	defer m.mu.Unlock()
	return [3]int{m.sent, m.failed, m.givenUp}
}

var noon = time.Date(2026, 6, 21, 12, 0, 0, 0, time.UTC)

type clock struct {
	mu sync.Mutex
	at time.Time
}

func (c *clock) now() time.Time   { c.mu.Lock(); defer c.mu.Unlock(); return c.at }
func (c *clock) set(at time.Time) { c.mu.Lock(); c.at = at; c.mu.Unlock() }

func testConfig(t *testing.T, w Way) (Config, *clock, *meter) {
	t.Helper()
	c, m := &clock{at: noon}, &meter{}
	return Config{Network: "test", Ways: []Way{w}, LogFile: filepath.Join(t.TempDir(), "sent.jsonl"), Now: c.now, CaughtUp: func() bool { return true },
		Sheet: func() string { return "all is well\n" }, Meter: m, Backoff: time.Millisecond, BackoffMax: 4 * time.Millisecond, Tries: 5}, c, m
}

func start(t *testing.T, c Config) *Notifier {
	t.Helper()
	n, err := Start(c)
	if err != nil {
		t.Fatal(err)
	}
	return n
}

func eventually(t *testing.T, what string, f func() bool) {
	t.Helper()
	for began := time.Now(); time.Since(began) < 60*time.Second; time.Sleep(2 * time.Millisecond) {
		if f() {
			return
		}
	}
	t.Fatalf("not within a minute: %s", what)
}

func episode(id string, rev int, kind rules.FaultKind) fault.Episode {
	return fault.Episode{ID: id, Rev: rev, Station: "northmoor", Instrument: "G1", Kind: kind, Severity: rules.Act, From: noon.Unix()/60 - 30, To: fault.Open,
		Raised: noon.Unix()/60 - 20, Confidence: 0.98, Evidence: []fault.Evidence{{Name: "minutes", Value: 30, Unit: "min"}}, Advice: "Check plug, cable and terminal."}
}

// A fault is told once when it is raised, not with every new revision, once when it ends; and a restart tells nothing again.
func TestToldOnceAlsoAcrossRestarts(t *testing.T) {
	w := &fakeWay{}
	c, _, _ := testConfig(t, w)
	n := start(t, c)
	e, watch := episode("a", 1, rules.SignalLost), episode("w", 1, rules.DomeSoiled)
	watch.Severity = rules.Watch
	n.Episodes("northmoor", []fault.Episode{e, watch})
	eventually(t, "raised", func() bool { return w.keys() == "a/1/raised" })
	e.Rev, e.Confidence = 2, 0.99
	n.Episodes("northmoor", []fault.Episode{e, watch})
	if err := n.Stop(); err != nil {
		t.Fatal(err)
	}
	n = start(t, c)
	b := episode("b", 1, rules.Noise)
	b.Raised++
	n.Episodes("northmoor", []fault.Episode{e, watch, b})
	eventually(t, "the other after the restart", func() bool { return w.keys() == "a/1/raised b/1/raised" })
	e.Rev, e.To = 3, noon.Unix()/60-5
	n.Episodes("northmoor", []fault.Episode{e, watch, b})
	eventually(t, "ended", func() bool { return w.keys() == "a/1/raised b/1/raised a/3/ended" })
	n.Episodes("northmoor", []fault.Episode{e, watch}) // b has gone: it was none
	eventually(t, "withdrawn", func() bool { return w.keys() == "a/1/raised b/1/raised a/3/ended b/1/withdrawn" })
	b.Rev, b.Kind = 2, rules.SignalFrozen // and is there again, as something else
	n.Episodes("northmoor", []fault.Episode{e, watch, b})
	eventually(t, "changed", func() bool { return strings.HasSuffix(w.keys(), " b/2/changed") })
	if err := n.Stop(); err != nil {
		t.Fatal(err)
	}
}

// What is old news when it is first heard of is not told; what came and went within the day is told in one message.
func TestOldNews(t *testing.T) {
	w := &fakeWay{}
	c, _, _ := testConfig(t, w)
	n := start(t, c)
	defer n.Stop()
	old, brief := episode("old", 2, rules.SignalLost), episode("brief", 2, rules.Noise)
	old.To, brief.To = noon.Unix()/60-2*1440, noon.Unix()/60-60
	n.Episodes("northmoor", []fault.Episode{old, brief})
	eventually(t, "the brief one", func() bool { return w.keys() == "brief/2/ended" })
}

// While the journal is read nothing is told: what is known then may be yesterday's.
func TestNothingIsToldWhileTheJournalIsRead(t *testing.T) {
	w := &fakeWay{}
	c, _, _ := testConfig(t, w)
	var mu sync.Mutex
	caughtUp, asked := false, 0
	c.CaughtUp = func() bool { mu.Lock(); defer mu.Unlock(); asked++; return caughtUp }
	n := start(t, c)
	defer n.Stop()
	n.Episodes("northmoor", []fault.Episode{episode("gone", 1, rules.SignalLost)})
	eventually(t, "it looked", func() bool { mu.Lock(); defer mu.Unlock(); return asked > 1 })
	n.Episodes("northmoor", []fault.Episode{episode("there", 1, rules.SignalLost)})
	mu.Lock()
	caughtUp = true
	mu.Unlock()
	eventually(t, "only what stood", func() bool { return w.keys() == "there/1/raised" })
}

// Over quiet hours messages wait; what came and went in them is one message. The morning sheet goes out once a day, also across restarts.
func TestQuietHoursAndMorningSheet(t *testing.T) {
	w := &fakeWay{}
	c, clock, _ := testConfig(t, w)
	c.Quiet, c.Morning = Quiet{From: 22 * 60, To: 6 * 60, Zone: time.UTC}, Morning{At: 6 * 60, Zone: time.UTC}
	night := time.Date(2026, 6, 22, 2, 0, 0, 0, time.UTC)
	clock.set(night)
	n := start(t, c)
	e := episode("a", 1, rules.SignalLost)
	n.Episodes("northmoor", []fault.Episode{e})
	e.Rev, e.To = 2, night.Unix()/60
	n.Episodes("northmoor", []fault.Episode{e})
	clock.set(night.Add(4 * time.Hour))
	eventually(t, "the morning", func() bool { return w.keys() == "a/2/ended sheet-2026-06-22" })
	if err := n.Stop(); err != nil {
		t.Fatal(err)
	}
	n = start(t, c)
	defer n.Stop()
	clock.set(night.Add(28 * time.Hour))
	eventually(t, "the next sheet", func() bool { return w.keys() == "a/2/ended sheet-2026-06-22 sheet-2026-06-23" })
	if got := w.got[1]; !strings.Contains(got.Text, "all is well") {
		t.Errorf("the sheet says %q", got.Text)
	}
}

func TestHours(t *testing.T) {
	q := Quiet{From: 22 * 60, To: 6 * 60, Zone: time.UTC}
	day := Quiet{From: 9 * 60, To: 17 * 60, Zone: time.FixedZone("", 7200)}
	for _, x := range []struct {
		q    Quiet
		hour int
		want bool
	}{{q, 21, false}, {q, 22, true}, {q, 0, true}, {q, 5, true}, {q, 6, false}, {day, 6, false}, {day, 7, true}, {day, 15, false}, {Quiet{}, 3, false}} {
		if got := x.q.Holds(time.Date(2026, 6, 21, x.hour, 0, 0, 0, time.UTC)); got != x.want {
			t.Errorf("%+v at %d: %v", x.q, x.hour, got)
		}
	}
	if _, err := ParseHour("25:00"); err == nil {
		t.Error("25:00 was taken")
	}
}

// A failure is tried again a bounded number of times and counted; a refusal is not tried again.
func TestRetriesAreBoundedAndCounted(t *testing.T) {
	for _, x := range []struct {
		name   string
		answer func(int) error
		counts [3]int
		sent   string
	}{
		{"third time lucky", func(n int) error {
			if n < 3 {
				return errors.New("busy")
			}
			return nil
		}, [3]int{1, 2, 0}, "a/1/raised"},
		{"never", func(int) error { return errors.New("busy") }, [3]int{0, 5, 1}, ""},
		{"refused", func(int) error { return &Final{errors.New("no")} }, [3]int{0, 1, 1}, ""},
	} {
		t.Run(x.name, func(t *testing.T) {
			w := &fakeWay{answer: x.answer}
			c, _, m := testConfig(t, w)
			n := start(t, c)
			n.Episodes("northmoor", []fault.Episode{episode("a", 1, rules.SignalLost)})
			eventually(t, "counted", func() bool { return m.counts() == x.counts })
			if err := n.Stop(); err != nil {
				t.Fatal(err)
			}
			if w.keys() != x.sent {
				t.Errorf("sent %q", w.keys())
			}
			text, err := os.ReadFile(c.LogFile)
			if err != nil || strings.Contains(string(text), "given_up") != (x.counts[2] > 0) {
				t.Errorf("log: %v\n%s", err, text)
			}
		})
	}
}

// A torn last line, as a power cut leaves it, is cut off; a damaged log is named with its line.
func TestSentLogThatIsDamaged(t *testing.T) {
	path := filepath.Join(t.TempDir(), "sent.jsonl")
	whole := `{"way":"webhook","key":"a/1/raised","event":"raised","id":"a","rev":1,"station":"northmoor","at":"2026-06-21T12:00:00Z"}` + "\n"
	if err := os.WriteFile(path, []byte(whole+`{"way":"webh`), 0o600); err != nil {
		t.Fatal(err)
	}
	s, err := openSentLog(path)
	if err != nil {
		t.Fatal(err)
	}
	if s.last("webhook", "a") == nil || len(s.open("webhook", "northmoor")) != 1 {
		t.Error("the whole line was lost")
	}
	if err := s.close(); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(whole+"nonsense\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := openSentLog(path); err == nil || !strings.Contains(err.Error(), "line 2") {
		t.Errorf("%v does not name line 2", err)
	}
}

// A real web server that takes, hangs, fails, redirects and refuses.
func TestWebhook(t *testing.T) {
	bodies, release := make(chan string, 10), make(chan struct{})
	mux := http.NewServeMux()
	mux.HandleFunc("/ok", func(w http.ResponseWriter, r *http.Request) {
		body, _ := io.ReadAll(r.Body)
		bodies <- r.Header.Get("Authorization") + " " + r.Header.Get("Idempotency-Key") + " " + string(body)
	})
	mux.HandleFunc("/hangs", func(http.ResponseWriter, *http.Request) { <-release })
	mux.HandleFunc("/fails", func(w http.ResponseWriter, _ *http.Request) { w.WriteHeader(http.StatusInternalServerError) })
	mux.HandleFunc("/busy", func(w http.ResponseWriter, _ *http.Request) { w.WriteHeader(http.StatusTooManyRequests) })
	mux.HandleFunc("/moved", func(w http.ResponseWriter, r *http.Request) { http.Redirect(w, r, "/ok", http.StatusMovedPermanently) })
	mux.HandleFunc("/gone", func(w http.ResponseWriter, _ *http.Request) { w.WriteHeader(http.StatusGone) })
	server := httptest.NewServer(mux)
	defer server.Close()
	defer close(release)
	for _, x := range []struct {
		path, want string
		final      bool
	}{{"/ok", "", false}, {"/hangs", "deadline", false}, {"/fails", "500", false}, {"/busy", "429", false}, {"/moved", "redirects to /ok", true}, {"/gone", "410", true}} {
		ctx, cancel := context.WithTimeout(context.Background(), 30*time.Second)
		if x.path == "/hangs" {
			cancel()
			ctx, cancel = context.WithTimeout(context.Background(), 50*time.Millisecond)
		}
		err := NewWebhook(server.URL+x.path, "secret").Send(ctx, &Message{Key: "a/1/raised", Event: Raised, Text: "x"})
		cancel()
		var final *Final
		if x.want == "" && err != nil || x.want != "" && (err == nil || !strings.Contains(err.Error(), x.want)) || errors.As(err, &final) != x.final {
			t.Errorf("%s: %v (final %v)", x.path, err, errors.As(err, &final))
		}
	}
	if len(bodies) != 1 {
		t.Errorf("%d messages taken, want 1: a redirect is not followed", len(bodies))
	}
	head, body, _ := strings.Cut(<-bodies, "{")
	var m Message
	if err := json.Unmarshal([]byte("{"+body), &m); err != nil || head != "Bearer secret a/1/raised " || m.Event != Raised {
		t.Errorf("%q %q %v", head, body, err)
	}
}

// A mail server of the test's own.
type postOffice struct {
	mu    sync.Mutex
	mails []string
	rcpts []string
	err   error
}

func (p *postOffice) NewSession(*smtp.Conn) (smtp.Session, error) { return p, nil }
func (p *postOffice) Mail(string, *smtp.MailOptions) error        { return nil }
func (p *postOffice) Rcpt(to string, _ *smtp.RcptOptions) error {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.rcpts = append(p.rcpts, to)
	return p.err
}
func (p *postOffice) Data(r io.Reader) error {
	text, err := io.ReadAll(r)
	p.mu.Lock()
	p.mails = append(p.mails, string(text))
	p.mu.Unlock()
	return err
}
func (p *postOffice) Reset()        {}
func (p *postOffice) Logout() error { return nil }

func TestMail(t *testing.T) {
	p := &postOffice{}
	server := smtp.NewServer(p)
	server.Domain = "localhost"
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	go server.Serve(l)
	defer server.Close()
	m := &Mail{Server: l.Addr().String(), From: "fluxwarden@example.org", To: []string{"one@example.org", "two@example.org"}, Now: func() time.Time { return noon }}
	e := episode("a", 1, rules.SignalLost)
	n := &Notifier{cfg: Config{Network: "test"}}
	msg := n.message(Raised, &e)
	msg.Subject += "\r\nBcc: third@example.org"
	if err := m.Send(context.Background(), &msg); err != nil {
		t.Fatal(err)
	}
	if len(p.mails) != 1 || len(p.rcpts) != 2 {
		t.Fatalf("%d mails to %d", len(p.mails), len(p.rcpts))
	}
	first := p.mails[0]
	for _, want := range []string{"Subject: northmoor G1: signal lost", "Message-ID: <", "To: one@example.org, two@example.org\r\n", "What to do: Check plug", "minutes: 30 min"} {
		if !strings.Contains(first, want) {
			t.Errorf("the mail has no %q:\n%s", want, first)
		}
	}
	if strings.Contains(first, "\r\nBcc:") {
		t.Errorf("a line break in a name has made a header:\n%s", first)
	}
	if err := m.Send(context.Background(), &msg); err != nil || p.mails[1] != first {
		t.Errorf("a repeat is not the same mail: %v", err)
	}
	for _, x := range []struct {
		err   error
		final bool
	}{{&smtp.SMTPError{Code: 550, EnhancedCode: smtp.EnhancedCode{5, 1, 1}, Message: "no such mailbox"}, true}, {&smtp.SMTPError{Code: 451, EnhancedCode: smtp.EnhancedCode{4, 3, 0}, Message: "come again"}, false}} {
		p.err = x.err
		err := m.Send(context.Background(), &msg)
		var final *Final
		if err == nil || errors.As(err, &final) != x.final {
			t.Errorf("%v: got %v, final %v", x.err, err, errors.As(err, &final))
		}
	}
	server.Close()
	var final *Final
	if err := m.Send(context.Background(), &msg); err == nil || errors.As(err, &final) {
		t.Errorf("a server that is away: %v", err)
	}
}

// A mail server that takes the connection and says nothing holds nobody.
func TestAMailServerThatHangs(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	ctx, cancel := context.WithTimeout(context.Background(), 50*time.Millisecond)
	defer cancel()
	m := &Mail{Server: l.Addr().String(), From: "a@example.org", To: []string{"b@example.org"}, Now: time.Now}
	var final *Final
	if err := m.Send(ctx, &Message{Key: "k"}); err == nil || errors.As(err, &final) {
		t.Errorf("got %v", err)
	}
}
