package gate

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"github.com/nats-io/nats.go"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
)

// What may wait in the client library before the gate has looked at it. It looks quickly: this is for a pause of the process.
const (
	unseenMessagesMax = 65_536
	unseenBytesMax    = 128 << 20
)

const closeWait = 5 * time.Second // for the last answers to be on their way

// A Gate is one front door. Several may stand before one broker; a request goes to one of them.
type Gate struct {
	broker  *broker.Broker
	s       Settings
	known   atomic.Pointer[func(string) bool]
	queue   *queue
	sub     *nats.Subscription
	done    chan struct{}
	decoder wire.Decoder // this and keep belong to the goroutine that flushes
	keep    bucket
	decode  func(*wire.Decoder, []byte) ([]minute.Reading, []wire.Refusal)

	mu       sync.Mutex
	stations map[string]*station
	strange  *station // stands for all that are not known
}

// New makes a gate; Start opens it.
func New(b *broker.Broker, s Settings) (*Gate, error) {
	if s.Known == nil || s.Now == nil {
		return nil, errors.New("gate: settings: Known and Now are needed")
	}
	g := &Gate{broker: b, s: s.withDefaults(), done: make(chan struct{}), stations: make(map[string]*station), strange: &station{partition: -1}}
	g.decode = func(d *wire.Decoder, payload []byte) ([]minute.Reading, []wire.Refusal) {
		return d.Decode(payload, nil)
	}
	g.queue = newQueue(&g.s)
	g.SetKnown(s.Known)
	return g, nil
}

// SetKnown changes which stations may speak, from the next payload on.
func (g *Gate) SetKnown(known func(station string) bool) { g.known.Store(&known) }

// Start begins to take requests.
func (g *Gate) Start() error {
	sub, err := g.broker.Conn.QueueSubscribe(SubjectPrefix+"*", queueGroup, g.message)
	if err != nil {
		return fmt.Errorf("gate: subscribe to %s*: %w", SubjectPrefix, err)
	}
	if err := sub.SetPendingLimits(unseenMessagesMax, unseenBytesMax); err != nil {
		return fmt.Errorf("gate: subscribe to %s*: %w", SubjectPrefix, err)
	}
	// Once Start is over the broker knows of the gate. Away, it hears of it when it is back, so that not being heard here is no error.
	_ = g.broker.Conn.FlushTimeout(subscribeWait)
	g.sub = sub
	go g.run()
	return nil
}

// subscribeWait is how long Start waits for the broker to know of the gate.
const subscribeWait = 5 * time.Second

// message is called for one request after another.
func (g *Gate) message(m *nats.Msg) {
	name := strings.TrimPrefix(m.Subject, SubjectPrefix)
	var answer func(Reply)
	if m.Reply != "" && answerable(name, m.Reply) {
		answer = func(r Reply) {
			if b, err := json.Marshal(r); err == nil {
				_ = m.Respond(b) // a sender that hears nothing asks again
			}
		}
	} else {
		g.s.Meter.Unanswered(1)
	}
	g.admit(name, m.Data, answer)
}

// answerable says whether an answer may go to a subject. The gate may publish anywhere and a sender may not, so it must not be
// made to write into a stream, or an answer of its making into another station's hands.
func answerable(station, reply string) bool {
	return strings.HasPrefix(reply, nats.InboxPrefix) || reply == strings.TrimSuffix(broker.AnswerPrefix, ".") ||
		strings.HasPrefix(reply, broker.AnswerPrefix+station+".")
}

// Take is the front door for senders in this process, such as one that reads MQTT or HTTP. It returns when the payload is
// on disk or refused, or ctx ends; then it may be on disk all the same.
func (g *Gate) Take(ctx context.Context, station string, payload []byte) (Reply, error) {
	replies := make(chan Reply, 1)
	g.admit(station, append([]byte(nil), payload...), func(r Reply) { replies <- r })
	select {
	case r := <-replies:
		return r, nil
	case <-ctx.Done():
		return Reply{}, ctx.Err()
	}
}

func (g *Gate) admit(name string, payload []byte, answer func(Reply)) {
	st := g.station(name)
	if st == nil { // all strangers wait in one place: names could be made up without end
		st = g.strange
	}
	r := request{st, name, payload, g.now(), answer}
	if reason, ok := g.queue.add(r); !ok {
		g.later(&r, reason)
	}
}

func (g *Gate) now() minute.Stamp { return minute.Stamp(g.s.Now().UnixMicro()) }

// station gives a known station's place, nil for one that is not known.
func (g *Gate) station(name string) *station {
	if !(*g.known.Load())(name) {
		return nil
	}
	g.mu.Lock()
	defer g.mu.Unlock()
	st := g.stations[name]
	if st == nil {
		st = &station{partition: broker.PartitionOf(name)}
		g.stations[name] = st
	}
	return st
}

// later tells a sender to come again. One that waits for no answer will not: what it sent is gone.
func (g *Gate) later(r *request, reason RetryReason) {
	if r.answer == nil {
		g.s.Meter.Dropped(reason, 1)
		return
	}
	g.s.Meter.Retried(reason, 1)
	r.answer(Reply{Retry: true, Reason: reason})
}

// Unseen is how many requests the client library has thrown away because the gate did not look in time.
func (g *Gate) Unseen() int {
	if g.sub == nil {
		return 0
	}
	n, err := g.sub.Dropped()
	if err != nil {
		return 0
	}
	return n
}

// Close takes no more requests, flushes those that wait and answers them.
func (g *Gate) Close(ctx context.Context) error {
	if g.sub == nil {
		return nil
	}
	drained := make(chan struct{})
	var once sync.Once
	g.sub.SetClosedHandler(func(string) { once.Do(func() { close(drained) }) })
	if err := g.sub.Drain(); err == nil {
		select {
		case <-drained:
		case <-ctx.Done():
		}
	}
	g.queue.close()
	select {
	case <-g.done:
	case <-ctx.Done():
		return fmt.Errorf("gate: close: %w: what was not answered will be sent again", ctx.Err())
	}
	ctx, cancel := context.WithTimeout(ctx, closeWait)
	defer cancel()
	if err := g.broker.Conn.FlushWithContext(ctx); err != nil && !errors.Is(err, nats.ErrConnectionClosed) {
		return fmt.Errorf("gate: close: last answers: %w", err)
	}
	return nil
}

// since is the time from a moment of the gate's clock.
func (g *Gate) since(t time.Time) time.Duration { return g.s.Now().Sub(t) }
