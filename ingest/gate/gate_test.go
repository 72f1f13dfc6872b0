package gate_test

import (
	"context"
	"encoding/json"
	"fmt"
	"testing"
	"time"

	"github.com/nats-io/nats.go"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/gate"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
)

// receipt is the time of the gate's clock in these tests.
var receipt = time.Date(2026, 6, 21, 12, 0, 0, 0, time.UTC)

// smallStreams are bounds that a test's disk can bear.
func smallStreams() broker.StreamSettings {
	s := broker.DefaultStreams()
	s.JournalBytes, s.RefusedBytes, s.ChangesBytes, s.FindingsBytes = 64<<20, 4<<20, 1<<20, 1<<20
	return s
}

type house struct {
	*testing.T
	ctx      context.Context
	server   *broker.Embedded
	broker   *broker.Broker
	gate     *gate.Gate
	meter    *gate.Counters
	client   *nats.Conn
	streams  broker.StreamSettings
	settings gate.Settings
}

// open starts a server, a gate and a client of its own.
func open(t *testing.T, change func(*house)) *house {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	t.Cleanup(cancel)
	h := &house{T: t, ctx: ctx, meter: &gate.Counters{}, streams: smallStreams()}
	h.settings = gate.Settings{Known: func(s string) bool { return s != "nowhere" }, Now: func() time.Time { return receipt }, Meter: h.meter, Linger: time.Millisecond}
	if change != nil {
		change(h)
	}
	var err error
	h.server, err = broker.StartEmbedded(ctx, broker.EmbeddedSettings{StoreDir: t.TempDir(), Listen: true, StoreBytes: h.streams.Bytes()})
	h.must(err)
	t.Cleanup(h.server.Stop)
	h.broker, err = broker.Connect(broker.ConnectSettings{Embedded: h.server})
	h.must(err)
	t.Cleanup(h.broker.Close)
	h.must(h.broker.EnsureStreams(ctx, h.streams))
	h.gate, err = gate.New(h.broker, h.settings)
	h.must(err)
	h.must(h.gate.Start())
	t.Cleanup(func() { h.must(h.gate.Close(ctx)) })
	h.client, err = nats.Connect(h.server.URL())
	h.must(err)
	t.Cleanup(h.client.Close)
	return h
}

func (h *house) must(err error) {
	h.Helper()
	if err != nil {
		h.Fatal(err)
	}
}

func (h *house) request(station, payload string) gate.Reply {
	h.Helper()
	m, err := h.client.RequestWithContext(h.ctx, gate.SubjectPrefix+station, []byte(payload))
	h.must(err)
	return parseReply(h.T, m.Data)
}

func parseReply(t *testing.T, data []byte) gate.Reply {
	t.Helper()
	var r gate.Reply
	if err := json.Unmarshal(data, &r); err != nil {
		t.Fatalf("reply %q: %v", data, err)
	}
	return r
}

// journal reads all that the journal holds, station by station.
func (h *house) journal() map[string][]minute.Reading {
	h.Helper()
	j, err := h.broker.Journal(h.ctx)
	h.must(err)
	state, err := j.State(h.ctx)
	h.must(err)
	all := make(map[string][]minute.Reading)
	if state.LastSeq < state.FirstSeq {
		return all
	}
	partitions := make([]int, broker.Partitions)
	for i := range partitions {
		partitions[i] = i
	}
	r, err := j.Read(h.ctx, partitions, state.FirstSeq)
	h.must(err)
	defer r.Close()
	for {
		e, err := r.Next(h.ctx)
		h.must(err)
		groups, err := wire.DecodeJournal(e.Payload)
		h.must(err)
		for _, g := range groups {
			if broker.PartitionOf(g.Station) != e.Partition {
				h.Fatalf("station %s is in partition %d", g.Station, e.Partition)
			}
			all[g.Station] = append(all[g.Station], g.Readings...)
		}
		if e.Seq == state.LastSeq {
			return all
		}
	}
}

func readingAt(second int, value float64) string {
	return fmt.Sprintf(`{"t":%q,"x":{"g1_mv":%g}}`, receipt.Add(time.Duration(second)*time.Second).Format(time.RFC3339), value)
}

func TestAnAnsweredReadingIsInTheJournal(t *testing.T) {
	h := open(t, nil)
	if r := h.request("northmoor", readingAt(0, 8.213)); !r.OK || r.N != 1 {
		t.Fatalf("reply %+v", r)
	}
	if r := h.request("northmoor", "["+readingAt(1, 8.5)+","+readingAt(200, 9)+"]"); !r.OK || r.N != 2 {
		t.Fatalf("reply to an array %+v", r)
	}
	got := h.journal()["northmoor"]
	if len(got) != 3 {
		t.Fatalf("%d readings in the journal, want 3", len(got))
	}
	want := minute.Reading{At: minute.Stamp(receipt.Add(time.Second).UnixMicro()), Received: minute.Stamp(receipt.UnixMicro())}
	if got[1].At != want.At || got[1].Received != want.Received || got[1].Ahead || got[1].Values[0].Channel != "g1_mv" || got[1].Values[0].Mean != 8.5 {
		t.Errorf("second reading is %+v", got[1])
	}
	if !got[2].Ahead {
		t.Error("a stamp 200 s ahead is not marked")
	}
	if n := h.meter.AckedReadings.Load(); n != 3 {
		t.Errorf("%d readings counted as acked", n)
	}
}
