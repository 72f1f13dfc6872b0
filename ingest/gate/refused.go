package gate

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"strconv"
	"strings"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
)

// Headers of a message in the stream REFUSED. Its payload is what was refused: the readings as they came, in an array, or the whole payload.
const (
	headerStation  = "Flux-Station"
	headerReason   = "Flux-Reason"   // of the first refusal
	headerDetail   = "Flux-Detail"   // of the first refusal
	headerCount    = "Flux-Count"    // of refusals
	headerReceived = "Flux-Received" // RFC 3339
	headerBytes    = "Flux-Bytes"    // of the whole, where more came than is kept
)

// keptBytesMax is how much of a refused payload is kept.
const keptBytesMax = 64 << 10

const refusedPrefix = "refused."

// ErrCutShort is returned for a refused payload of which only the beginning is kept.
var ErrCutShort = errors.New("gate: only the beginning of it was kept: it cannot be requeued")

func refusedMessage(r *request, refused []wire.Refusal) *nats.Msg {
	raw := r.payload
	if refused[0].Index != wire.Whole {
		raw = []byte{'['}
		for i := range refused {
			if i > 0 {
				raw = append(raw, ',')
			}
			raw = append(raw, r.payload[refused[i].Start:refused[i].End]...)
		}
		raw = append(raw, ']')
	}
	m := nats.NewMsg(refusedPrefix + string(refused[0].Reason))
	m.Header.Set(headerStation, r.name)
	m.Header.Set(headerReason, string(refused[0].Reason))
	m.Header.Set(headerDetail, strings.Map(printable, refused[0].Detail))
	m.Header.Set(headerCount, strconv.Itoa(len(refused)))
	m.Header.Set(headerReceived, string(wire.AppendTime(nil, r.received)))
	if len(raw) > keptBytesMax {
		m.Header.Set(headerBytes, strconv.Itoa(len(raw)))
		raw = raw[:keptBytesMax]
	}
	m.Data = raw
	return m
}

// SetAside puts into the stream what was refused behind the gate, such as readings that the core could not judge; the
// payload is theirs as it would be sent. It returns when it is on disk.
func (r *RefusedStream) SetAside(ctx context.Context, station string, received time.Time, reason wire.Reason, detail string, count int,
	payload []byte) error {
	m := refusedMessage(&request{name: station, payload: payload, received: minute.Stamp(received.UnixMicro())},
		[]wire.Refusal{{Reason: reason, Detail: detail, Index: wire.Whole}})
	m.Header.Set(headerCount, strconv.Itoa(count))
	if _, err := r.broker.JS.PublishMsg(ctx, m, jetstream.WithExpectStream(broker.RefusedStream)); err != nil {
		return fmt.Errorf("gate: stream %s: set aside: %w", broker.RefusedStream, err)
	}
	return nil
}

func printable(r rune) rune {
	if r < ' ' {
		return ' '
	}
	return r
}

// A RefusedItem is one message of the stream REFUSED.
type RefusedItem struct {
	Seq      uint64      `json:"seq"`
	Station  string      `json:"station"`
	Reason   wire.Reason `json:"reason"`
	Detail   string      `json:"detail"`
	Count    int         `json:"count"`    // readings refused in it
	Received time.Time   `json:"received"` // by the gate
	CutShort bool        `json:"cut_short"`
	Bytes    int         `json:"bytes"`         // as it came
	Raw      []byte      `json:"raw,omitempty"` // nil in a list
}

// A RefusedStream is the stream REFUSED, for those who look after it.
type RefusedStream struct {
	broker *broker.Broker
	stream jetstream.Stream
}

// OpenRefused opens the stream.
func OpenRefused(ctx context.Context, b *broker.Broker) (*RefusedStream, error) {
	s, err := b.JS.Stream(ctx, broker.RefusedStream)
	if err != nil {
		return nil, fmt.Errorf("gate: stream %s: %w", broker.RefusedStream, err)
	}
	return &RefusedStream{b, s}, nil
}

// List calls f for every item, oldest first, without its bytes, until f is false. Empty station and reason stand for all.
func (r *RefusedStream) List(ctx context.Context, station string, reason wire.Reason, f func(RefusedItem) bool) error {
	filter := refusedPrefix + "*"
	if reason != "" {
		filter = refusedPrefix + string(reason)
	}
	info, err := r.stream.Info(ctx)
	if err != nil {
		return fmt.Errorf("gate: stream %s: %w", broker.RefusedStream, err)
	}
	for seq := info.State.FirstSeq; seq <= info.State.LastSeq; seq++ {
		m, err := r.stream.GetMsg(ctx, seq, jetstream.WithGetMsgSubject(filter))
		if errors.Is(err, jetstream.ErrMsgNotFound) {
			return nil
		}
		if err != nil {
			return fmt.Errorf("gate: stream %s: entry %d: %w", broker.RefusedStream, seq, err)
		}
		seq = m.Sequence // the next of the subject at or behind the one asked for
		item := refusedItem(m)
		item.Raw = nil
		if station != "" && item.Station != station {
			continue
		}
		if !f(item) {
			return nil
		}
	}
	return nil
}

// Show gives one item with its bytes.
func (r *RefusedStream) Show(ctx context.Context, seq uint64) (RefusedItem, error) {
	m, err := r.stream.GetMsg(ctx, seq)
	if err != nil {
		return RefusedItem{}, fmt.Errorf("gate: stream %s: entry %d: %w", broker.RefusedStream, seq, err)
	}
	return refusedItem(m), nil
}

// Requeue sends an item through the front door again. Where everything in it is on disk now, it is deleted from REFUSED.
// Otherwise it stays; what was refused again is there a second time, with its new reason.
func (r *RefusedStream) Requeue(ctx context.Context, seq uint64) (Reply, error) {
	item, err := r.Show(ctx, seq)
	if err != nil {
		return Reply{}, err
	}
	if item.CutShort {
		return Reply{}, fmt.Errorf("%w: entry %d: %d of %d bytes", ErrCutShort, seq, len(item.Raw), item.Bytes)
	}
	m, err := r.broker.Conn.RequestWithContext(ctx, SubjectPrefix+item.Station, item.Raw)
	if err != nil {
		return Reply{}, fmt.Errorf("gate: requeue entry %d: %w", seq, err)
	}
	var reply Reply
	if err := json.Unmarshal(m.Data, &reply); err != nil {
		return Reply{}, fmt.Errorf("gate: requeue entry %d: reply: %w", seq, err)
	}
	if !reply.OK {
		return reply, nil
	}
	if err := r.stream.DeleteMsg(ctx, seq); err != nil {
		return reply, fmt.Errorf("gate: stream %s: entry %d is requeued but not deleted: %w", broker.RefusedStream, seq, err)
	}
	return reply, nil
}

func refusedItem(m *jetstream.RawStreamMsg) RefusedItem {
	item := RefusedItem{Seq: m.Sequence, Station: m.Header.Get(headerStation), Reason: wire.Reason(m.Header.Get(headerReason)),
		Detail: m.Header.Get(headerDetail), Bytes: len(m.Data), Raw: m.Data}
	item.Count, _ = strconv.Atoi(m.Header.Get(headerCount))
	item.Received, _ = time.Parse(time.RFC3339, m.Header.Get(headerReceived))
	if n, err := strconv.Atoi(m.Header.Get(headerBytes)); err == nil {
		item.Bytes, item.CutShort = n, true
	}
	return item
}
