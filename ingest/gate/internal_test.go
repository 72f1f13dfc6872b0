package gate

import (
	"bytes"
	"context"
	"fmt"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/nats-io/nats.go"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
)

// inside opens a gate on a server without a socket.
func inside(t testing.TB, s Settings) (*Gate, *Counters) {
	t.Helper()
	ctx := context.Background()
	streams := broker.DefaultStreams()
	streams.JournalBytes, streams.RefusedBytes = 1<<30, 16<<20
	server, err := broker.StartEmbedded(ctx, broker.EmbeddedSettings{StoreDir: t.TempDir(), StoreBytes: streams.Bytes()})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(server.Stop)
	b, err := broker.Connect(broker.ConnectSettings{Embedded: server})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(b.Close)
	if err := b.EnsureStreams(ctx, streams); err != nil {
		t.Fatal(err)
	}
	c := &Counters{}
	s.Meter, s.Now, s.Known = c, time.Now, func(string) bool { return true }
	g, err := New(b, s)
	if err != nil {
		t.Fatal(err)
	}
	return g, c
}

func TestAPayloadThatMakesTheDecoderPanicIsSetAside(t *testing.T) {
	ctx := t.Context()
	g, c := inside(t, Settings{Linger: time.Millisecond})
	decode := g.decode
	g.decode = func(d *wire.Decoder, payload []byte) ([]minute.Reading, []wire.Refusal) {
		if strings.Contains(string(payload), "poison") {
			panic("index out of range")
		}
		return decode(d, payload)
	}
	if err := g.Start(); err != nil {
		t.Fatal(err)
	}
	r, err := g.Take(ctx, "northmoor", []byte(`{"poison":1}`))
	if err != nil || r.OK || r.Retry || len(r.Refused) != 1 || r.Refused[0].Reason != wire.InternalError {
		t.Fatalf("%+v, %v", r, err)
	}
	now := wire.AppendTime(nil, minute.Stamp(time.Now().UnixMicro()))
	if r, err := g.Take(ctx, "northmoor", fmt.Appendf(nil, `{"t":%q,"x":{"a":1}}`, now)); err != nil || !r.OK {
		t.Fatalf("the next: %+v, %v", r, err)
	}
	s, err := OpenRefused(ctx, g.broker)
	if err != nil {
		t.Fatal(err)
	}
	item, err := s.Show(ctx, 1)
	if err != nil || string(item.Raw) != `{"poison":1}` || c.RefusedFor(wire.InternalError) != 1 {
		t.Errorf("kept as %+v, %v", item, err)
	}
	if err := g.Close(ctx); err != nil {
		t.Fatal(err)
	}
	if r, err := g.Take(ctx, "northmoor", nil); err != nil || r.Reason != ShuttingDown {
		t.Errorf("after the close: %+v, %v", r, err)
	}
}

func TestWhatIsKeptOfRefusedPayloadsIsBounded(t *testing.T) {
	g, c := inside(t, Settings{RefusedPerSecond: 1e-9, RefusedBurst: 3})
	f := &flush{}
	for i := range 10 {
		for _, name := range []string{"a", "b"} {
			if o := g.look(f, &request{station: g.station(name), name: name, payload: []byte("bad")}, i, time.Now()); len(o.refused) != 1 {
				t.Fatalf("outcome %+v", o)
			}
		}
	}
	if len(f.kept) != 6 || c.NotKeptMessages.Load() != 14 || c.RefusedFor(wire.NotJSON) != 20 {
		t.Errorf("%d kept, %d not, %d refused", len(f.kept), c.NotKeptMessages.Load(), c.RefusedFor(wire.NotJSON))
	}
}

// What the journal's frames of one flush can come to must be less than the broker takes.
func TestTheDensestFlushFitsIntoOneFrame(t *testing.T) {
	var b strings.Builder
	b.WriteString("[")
	for b.Len() < wire.PayloadBytesMax-4000 {
		if b.Len() > 1 {
			b.WriteString(",")
		}
		b.WriteString(`{"t":"2026-06-21T12:00:01Z","x":{`)
		for i := range 500 { // as little text a value as can be
			if i > 0 {
				b.WriteString(",")
			}
			fmt.Fprintf(&b, `"%c%c":0`, 'a'+i/26, 'a'+i%26)
		}
		b.WriteString("}}")
	}
	b.WriteString("]")
	readings, err := wire.DecodeJSON([]byte(b.String()), nil)
	if err != nil {
		t.Fatal(err)
	}
	frame := wire.AppendJournal(nil, []wire.Group{{Station: "a", Readings: readings}})
	s := Settings{}.withDefaults()
	// A flush takes payloads until it has FlushBytes: at most that and one payload more.
	if worst := float64(len(frame)) / float64(b.Len()) * float64(s.FlushBytes+wire.PayloadBytesMax); worst > broker.MessageBytesMax {
		t.Errorf("a flush can come to %.0f bytes, the broker takes %d", worst, broker.MessageBytesMax)
	}
}

func TestTheQueueDealsInTurnAndForgetsNothing(t *testing.T) {
	s := Settings{FlushMessages: 7, StationMessagesMax: 50, PendingBytesMax: 1000}.withDefaults()
	q := newQueue(&s)
	stations := []*station{{}, {}, {}}
	in := map[*station]int{}
	for i := range 200 {
		st := stations[(i*i)%3]
		if _, ok := q.add(request{station: st, payload: make([]byte, 10), received: minute.Stamp(in[st])}); ok {
			in[st]++
		}
	}
	out := map[*station]int{}
	for q.messages > 0 {
		requests := q.take(nil)
		if len(requests) > 7 {
			t.Fatalf("%d requests in a flush", len(requests))
		}
		for _, r := range requests {
			if int(r.received) != out[r.station] {
				t.Fatalf("a station's requests came out of order")
			}
			out[r.station]++
		}
	}
	for i, st := range stations {
		if in[st] != out[st] || st.bytes != 0 {
			t.Errorf("station %d: %d in, %d out, %d bytes left", i, in[st], out[st], st.bytes)
		}
	}
	if q.bytes != 0 || len(q.ring) != 0 {
		t.Errorf("left: %d bytes, %d stations", q.bytes, len(q.ring))
	}
	if _, ok := q.add(request{station: stations[0], payload: make([]byte, 900)}); !ok {
		t.Error("an empty queue turned a payload away")
	}
	if _, ok := q.add(request{station: stations[0], payload: make([]byte, 200)}); ok {
		t.Error("a station that is waiting was let in over the common bound")
	}
	if _, ok := q.add(request{station: stations[1], payload: make([]byte, 200)}); !ok {
		t.Error("a station with nothing waiting was turned away for another's sake")
	}
}

func replyCounter(window chan struct{}, failed *atomic.Int64) nats.MsgHandler {
	return func(m *nats.Msg) {
		if !bytes.Contains(m.Data, []byte(`"ok":true`)) {
			failed.Add(1)
		}
		<-window
	}
}

// BenchmarkGate sends one reading a request from many stations, a thousand in the air, with every write synced.
func BenchmarkGate(b *testing.B) {
	for _, stations := range []int{1, 200, 2000} {
		b.Run(fmt.Sprintf("stations=%d", stations), func(b *testing.B) {
			g, c := inside(b, Settings{RatePerSecond: 1e9, RateBurst: 1e9})
			if err := g.Start(); err != nil {
				b.Fatal(err)
			}
			conn := g.broker.Conn
			window := make(chan struct{}, 1000)
			var failed atomic.Int64
			inbox := conn.NewInbox()
			sub, err := conn.Subscribe(inbox, replyCounter(window, &failed))
			if err != nil {
				b.Fatal(err)
			}
			begin := time.Now()
			for i := 0; b.Loop(); i++ {
				window <- struct{}{}
				at := wire.AppendTime(nil, minute.Stamp(begin.UnixMicro()+int64(i)))
				payload := fmt.Appendf(nil, `{"t":%q,"x":{"g1_mv":8.213,"d1_mv":0.412,"n1_mv":7.901,"l1_mv":-0.31,"l1_case_c":18.4,"ta_c":17.9}}`, at)
				if err := conn.PublishRequest(fmt.Sprintf("%ss%d", SubjectPrefix, i%stations), inbox, payload); err != nil {
					b.Fatal(err)
				}
			}
			for range cap(window) {
				window <- struct{}{}
			}
			took := time.Since(begin)
			b.ReportMetric(float64(c.AckedReadings.Load())/took.Seconds(), "readings/s")
			b.ReportMetric(float64(c.FlushedReadings.Load())/float64(c.Flushes.Load()), "readings/flush")
			b.ReportMetric(float64(c.FlushNanos.Load())/float64(c.Flushes.Load())/1e6, "ms/flush")
			if n := failed.Load(); n > 0 {
				b.Fatalf("%d were not taken", n)
			}
			if err := sub.Unsubscribe(); err != nil {
				b.Fatal(err)
			}
			if err := g.Close(context.Background()); err != nil {
				b.Fatal(err)
			}
		})
	}
}
