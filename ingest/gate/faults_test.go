package gate_test

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/nats-io/nats.go"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/gate"
	"fluxwarden/ingest/wire"
)

func TestWhatIsWrongIsRefusedAndKept(t *testing.T) {
	h := open(t, nil)
	at := func(d time.Duration) string {
		return fmt.Sprintf(`{"t":%q,"x":{"a":1}}`, receipt.Add(d).Format(time.RFC3339))
	}
	good := at(0)
	for i, c := range []struct {
		station, payload string
		n                int
		reasons          []wire.Reason
		kept             string // empty: the payload itself
	}{
		{"northmoor", `hello`, 0, []wire.Reason{wire.NotJSON}, ""},
		{"northmoor", `{"t":"2026-06-21T12:00:01Z","x":{"a":NaN}}`, 0, []wire.Reason{wire.NotJSON}, ""},
		{"northmoor", strings.Repeat(`{"a":`, 50_000), 0, []wire.Reason{wire.TooDeep}, strings.Repeat(`{"a":`, 50_000)[:64<<10]},
		{"northmoor", "[" + strings.Repeat(" ", 2<<20) + "]", 0, []wire.Reason{wire.TooLarge}, "[" + strings.Repeat(" ", 64<<10-1)},
		{"nowhere", good, 0, []wire.Reason{wire.UnknownStation}, ""},
		{"northmoor", at(27 * time.Hour), 0, []wire.Reason{wire.Ahead}, ""},
		{"northmoor", at(25 * time.Hour), 1, nil, ""},
		{"northmoor", at(-32 * 24 * time.Hour), 0, []wire.Reason{wire.TooOld}, ""},
		{"northmoor", at(-30 * 24 * time.Hour), 1, nil, ""},
		{"northmoor", "[" + good + ",7," + good + "," + at(27*time.Hour) + "]", 2, []wire.Reason{wire.BadValue, wire.Ahead}, "[7," + at(27*time.Hour) + "]"},
	} {
		r := h.request(c.station, c.payload)
		if r.OK != (len(c.reasons) == 0) || r.N != c.n || r.Retry || len(r.Refused) != len(c.reasons) {
			t.Fatalf("case %d: reply %+v", i, r)
		}
		for k := range c.reasons {
			if r.Refused[k].Reason != c.reasons[k] {
				t.Errorf("case %d: %+v, want %s", i, r.Refused[k], c.reasons[k])
			}
		}
		if len(c.reasons) == 0 {
			continue
		}
		item := h.lastRefused()
		kept := c.kept
		if kept == "" {
			kept = c.payload
		}
		if string(item.Raw) != kept && "["+kept+"]" != string(item.Raw) {
			t.Errorf("case %d: kept %.100q, want %.100q", i, item.Raw, kept)
		}
		if item.Station != c.station || item.Reason != c.reasons[0] || item.Count != len(c.reasons) || !item.Received.Equal(receipt) || item.Detail == "" {
			t.Errorf("case %d: kept as %+v", i, item)
		}
	}
	if n := h.meter.RefusedFor(wire.Ahead); n != 2 {
		t.Errorf("%d counted as ahead", n)
	}
	if got := h.journal()["northmoor"]; len(got) != 4 {
		t.Errorf("%d readings in the journal", len(got))
	}
}

func (h *house) lastRefused() gate.RefusedItem {
	h.Helper()
	s, err := gate.OpenRefused(h.ctx, h.broker)
	h.must(err)
	var last gate.RefusedItem
	h.must(s.List(h.ctx, "", "", func(i gate.RefusedItem) bool { last = i; return true }))
	last, err = s.Show(h.ctx, last.Seq)
	h.must(err)
	return last
}

func TestARefusedReadingCanBeRequeued(t *testing.T) {
	h := open(t, nil)
	h.request("nowhere", readingAt(0, 1))
	h.request("northmoor", "not json")
	s, err := gate.OpenRefused(h.ctx, h.broker)
	h.must(err)
	count := func(station string, reason wire.Reason) (n int) {
		h.must(s.List(h.ctx, station, reason, func(gate.RefusedItem) bool { n++; return true }))
		return n
	}
	if count("", "") != 2 || count("nowhere", "") != 1 || count("", wire.NotJSON) != 1 || count("nowhere", wire.NotJSON) != 0 {
		t.Fatal("the list is wrong")
	}
	h.gate.SetKnown(func(string) bool { return true })
	r, err := s.Requeue(h.ctx, 1)
	if err != nil || !r.OK || r.N != 1 {
		t.Fatalf("requeue: %+v, %v", r, err)
	}
	if len(h.journal()["nowhere"]) != 1 {
		t.Error("it is not in the journal")
	}
	if count("nowhere", "") != 0 {
		t.Error("it is still in REFUSED")
	}
	if r, err := s.Requeue(h.ctx, 2); err != nil || r.OK || count("", wire.NotJSON) != 2 {
		t.Errorf("requeue of what is wrong: %+v, %v", r, err)
	}
}

func TestTenMegabytesAreStoppedByTheClientLibrary(t *testing.T) {
	h := open(t, nil)
	if err := h.client.Publish(gate.SubjectPrefix+"northmoor", make([]byte, 10<<20)); !errors.Is(err, nats.ErrMaxPayload) {
		t.Fatalf("got %v", err)
	}
	if r := h.request("northmoor", readingAt(0, 1)); !r.OK {
		t.Errorf("the next reading: %+v", r)
	}
}

// A sender that does not know the limit is told by the protocol, and only its own connection is cut.
func TestTenMegabytesFromARawConnectionAreCutOff(t *testing.T) {
	h := open(t, nil)
	conn, err := net.Dial("tcp", strings.TrimPrefix(h.server.URL(), "nats://"))
	h.must(err)
	defer func() { _ = conn.Close() }()
	deadline, _ := h.ctx.Deadline()
	h.must(conn.SetDeadline(deadline))
	_, err = io.WriteString(conn, "CONNECT {\"verbose\":false}\r\nPUB rad.v1.northmoor 10485760\r\n")
	h.must(err)
	answer, _ := io.ReadAll(conn)
	if !strings.Contains(string(answer), "Maximum Payload Violation") {
		t.Errorf("answered %q", answer)
	}
	if r := h.request("northmoor", readingAt(0, 1)); !r.OK {
		t.Errorf("another connection: %+v", r)
	}
}

func TestWhatTheWorkerCannotJudgeIsKeptToo(t *testing.T) {
	h := open(t, nil)
	s, err := gate.OpenRefused(h.ctx, h.broker)
	h.must(err)
	h.must(s.SetAside(h.ctx, "northmoor", receipt, "panic", "it said\nthis", 3, []byte(readingAt(0, 1))))
	if i := h.lastRefused(); i.Station != "northmoor" || i.Reason != "panic" || i.Count != 3 || i.Detail != "it said this" || string(i.Raw) != readingAt(0, 1) {
		t.Errorf("kept as %+v", i)
	}
}

func TestAFullJournalAsksToComeAgainAndLosesNothing(t *testing.T) {
	h := open(t, func(h *house) { h.streams.JournalBytes = 20_000 })
	acked := 0
	full := false
	for i := 0; i < 1000 && !full; i++ {
		switch r := h.request("northmoor", readingAt(i, float64(i))); {
		case r.OK:
			acked++
		case r.Retry && r.Reason == gate.JournalFull:
			full = true
		default:
			t.Fatalf("reply %+v", r)
		}
	}
	if !full || acked == 0 {
		t.Fatalf("not full after %d readings", acked)
	}
	if got := h.journal()["northmoor"]; len(got) != acked || got[0].Values[0].Mean != 0 {
		t.Fatalf("%d readings in the journal, %d acked", len(got), acked)
	}
	j, err := h.broker.Journal(h.ctx)
	h.must(err)
	state, err := j.State(h.ctx)
	h.must(err)
	h.must(j.Purge(h.ctx, state.LastSeq))
	if r := h.request("northmoor", readingAt(2000, 1)); !r.OK {
		t.Errorf("after the purge: %+v", r)
	}
}

func TestTheFloodOfOneStationIsItsOwnWait(t *testing.T) {
	release := make(chan struct{})
	var once sync.Once
	h := open(t, func(h *house) {
		h.settings.StationMessagesMax, h.settings.FlushMessages = 100, 50
		h.settings.DiskLow = func() bool { once.Do(func() { <-release }); return false } // holds the first flush in the air
		h.settings.Known = func(s string) bool {                                         // asked in the order of arrival
			if s == "marker" {
				close(release)
			}
			return s != "marker"
		}
	})
	inbox := h.client.NewInbox()
	replies, err := h.client.SubscribeSync(inbox + ".*")
	h.must(err)
	const flood = 1000
	for i := range flood {
		h.must(h.client.PublishRequest(gate.SubjectPrefix+"loud", inbox+".loud", []byte(readingAt(i, 1))))
	}
	for i := range 10 {
		h.must(h.client.PublishRequest(gate.SubjectPrefix+"quiet", inbox+".quiet", []byte(readingAt(i, 1))))
	}
	h.must(h.client.Publish(gate.SubjectPrefix+"marker", nil)) // behind it, everything is queued or turned away
	count := map[string]int{}
	quietAfter := 0
	for n := 0; n < flood+10; n++ {
		m, err := replies.NextMsgWithContext(h.ctx)
		h.must(err)
		from := strings.TrimPrefix(m.Subject, inbox+".")
		r := parseReply(t, m.Data)
		if r.Retry && r.Reason != gate.Busy {
			t.Fatalf("reply %+v", r)
		}
		key := from + " taken"
		if r.Retry {
			key = from + " busy"
		}
		count[key]++
		if key == "quiet taken" {
			quietAfter = count["loud taken"]
		}
	}
	if count["quiet taken"] != 10 || count["quiet busy"] != 0 {
		t.Errorf("the quiet station: %v", count)
	}
	if quietAfter > 60 { // a flush of 50 that was in the air, then turn by turn
		t.Errorf("the quiet station waited behind %d readings of the loud one", quietAfter)
	}
	if count["loud taken"] < 101 || count["loud taken"] > 150 {
		t.Errorf("the loud station: %v", count)
	}
	if got := h.journal(); len(got["loud"]) != count["loud taken"] || len(got["quiet"]) != 10 {
		t.Errorf("journal has %d and %d, answered were %v", len(got["loud"]), len(got["quiet"]), count)
	}
}

func TestAStationOverItsRateIsAskedToComeAgain(t *testing.T) {
	var mu sync.Mutex
	now := receipt
	h := open(t, func(h *house) {
		h.settings.Now = func() time.Time { mu.Lock(); defer mu.Unlock(); return now }
		h.settings.RatePerSecond, h.settings.RateBurst = 10, 20
	})
	taken := 0
	for i := range 30 {
		r := h.request("northmoor", readingAt(i, 1))
		if r.OK {
			taken++
		} else if !r.Retry || r.Reason != gate.TooFast {
			t.Fatalf("reply %+v", r)
		}
	}
	if taken != 20 {
		t.Errorf("%d of 30 taken, want the burst of 20", taken)
	}
	if r := h.request("southmoor", readingAt(0, 1)); !r.OK {
		t.Errorf("another station: %+v", r)
	}
	mu.Lock()
	now = now.Add(time.Second)
	mu.Unlock()
	if r := h.request("northmoor", readingAt(31, 1)); !r.OK {
		t.Errorf("a second later: %+v", r)
	}
}

func TestNothingIsTakenWhenTheDiskIsLow(t *testing.T) {
	h := open(t, func(h *house) { h.settings.DiskLow = func() bool { return true } })
	if r := h.request("northmoor", readingAt(0, 1)); r.OK || !r.Retry || r.Reason != gate.DiskIsLow {
		t.Errorf("reply %+v", r)
	}
	if len(h.journal()) != 0 {
		t.Error("something is in the journal")
	}
}

func TestReadingsWithoutAReplySubjectAreTakenToo(t *testing.T) {
	h := open(t, nil)
	h.must(h.client.Publish(gate.SubjectPrefix+"northmoor", []byte(readingAt(0, 1))))
	if r := h.request("northmoor", readingAt(1, 1)); !r.OK { // of one station: in order
		t.Fatalf("reply %+v", r)
	}
	if got := h.journal()["northmoor"]; len(got) != 2 || h.meter.UnansweredMessages.Load() != 1 {
		t.Errorf("%d in the journal, %d counted", len(got), h.meter.UnansweredMessages.Load())
	}
}

func TestTakeIsTheSameDoor(t *testing.T) {
	h := open(t, nil)
	r, err := h.gate.Take(h.ctx, "northmoor", []byte(readingAt(0, 1)))
	if err != nil || !r.OK || len(h.journal()["northmoor"]) != 1 {
		t.Errorf("%+v, %v", r, err)
	}
}

// The broker goes down in the middle, with everything on a real port, and the client sends again what was not answered.
func TestEveryAnsweredReadingOutlivesTheBroker(t *testing.T) {
	h := open(t, func(h *house) { h.settings.AckWait = 2 * time.Second })
	dir := t.TempDir()
	server, err := broker.StartEmbedded(h.ctx, broker.EmbeddedSettings{StoreDir: dir, Listen: true, StoreBytes: h.streams.Bytes()})
	h.must(err)
	var port int
	_, err = fmt.Sscanf(server.URL(), "nats://127.0.0.1:%d", &port)
	h.must(err)
	b, err := broker.Connect(broker.ConnectSettings{URL: server.URL()})
	h.must(err)
	defer b.Close()
	h.must(b.EnsureStreams(h.ctx, h.streams))
	g, err := gate.New(b, h.settings)
	h.must(err)
	h.must(g.Start())
	client, err := nats.Connect(server.URL(), nats.MaxReconnects(-1), nats.ReconnectWait(50*time.Millisecond))
	h.must(err)
	defer client.Close()

	const readings, restartEvery = 300, 100
	retries := 0
	for i := 0; i < readings; {
		if i%restartEvery == restartEvery/2 && retries < i/restartEvery+1 {
			retries++
			stopped := make(chan struct{})
			go func() { server.Stop(); close(stopped) }()
			// Sent while the server goes down: it may be stored or not, and is sent again below in any case.
			_, _ = client.Request(gate.SubjectPrefix+"northmoor", []byte(readingAt(i, float64(i))), 100*time.Millisecond)
			<-stopped
			server, err = broker.StartEmbedded(h.ctx, broker.EmbeddedSettings{StoreDir: dir, Listen: true, Port: port, StoreBytes: h.streams.Bytes()})
			h.must(err)
		}
		m, err := client.Request(gate.SubjectPrefix+"northmoor", []byte(readingAt(i, float64(i))), time.Second)
		if err != nil {
			if h.ctx.Err() != nil {
				t.Fatalf("at reading %d: %v", i, err)
			}
			continue
		}
		var r gate.Reply
		h.must(json.Unmarshal(m.Data, &r))
		if r.OK {
			i++
		}
	}
	defer server.Stop()
	h.must(g.Close(h.ctx))
	h.broker = b
	seen := map[float64]int{}
	for _, r := range h.journal()["northmoor"] {
		if want := receipt.Add(time.Duration(r.Values[0].Mean) * time.Second).UnixMicro(); int64(r.At) != want {
			t.Errorf("reading %g has the time %d", r.Values[0].Mean, r.At)
		}
		seen[r.Values[0].Mean]++
	}
	for i := range readings {
		if seen[float64(i)] == 0 {
			t.Errorf("reading %d was answered and is not in the journal", i)
		}
	}
	if len(seen) != readings || retries != 3 {
		t.Errorf("%d different readings, %d restarts", len(seen), retries)
	}
}
