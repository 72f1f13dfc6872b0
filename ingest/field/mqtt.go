package field

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"os"
	"strings"
	"sync"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/wire"
)

// Bounds of MQTT.
const (
	mqttConnectWait = 10 * time.Second // for a client to say who it is
	mqttSilentMax   = 20 * time.Minute // for one that asked for no keep-alive
	mqttWriteWait   = 30 * time.Second
	mqttClientsMax  = 4096
	mqttInFlight    = 64       // publishes of one client that the door has not answered; more are not read from it
	mqttSlotBytes   = 32 << 10 // a larger message takes the place of several
	mqttTopicHead   = "rad/v1/"
)

// MQTTSettings say where what comes by MQTT goes.
type MQTTSettings struct {
	Door  Door
	Guard Guard
	// Refuse keeps what the door is not asked about, such as a topic that is no station's; optional.
	Refuse func(ctx context.Context, station string, reason wire.Reason, detail string, count int, payload []byte) error
	Log    *slog.Logger
}

// An MQTT server takes readings on the topics rad/v1/STATION and gives nothing out. The acknowledgement of a message of QoS 1 or 2 is
// the answer of the door: the readings are on disk in the journal, or refused and kept with the reason. One that is asked to come
// again is not acknowledged before it was taken.
type MQTT struct {
	s      MQTTSettings
	once   once
	ctx    context.Context
	cancel context.CancelFunc

	mu      sync.Mutex
	clients map[*mqttClient]bool
	done    sync.WaitGroup
}

// NewMQTT makes a server.
func NewMQTT(s MQTTSettings) *MQTT {
	ctx, cancel := context.WithCancel(context.Background())
	return &MQTT{s: s, once: once{log: s.Log}, ctx: ctx, cancel: cancel, clients: map[*mqttClient]bool{}}
}

// Serve takes connections until the listener is closed.
func (m *MQTT) Serve(l net.Listener) error {
	for {
		conn, err := l.Accept()
		if err != nil {
			if m.ctx.Err() != nil || errors.Is(err, net.ErrClosed) {
				return nil
			}
			var temporary net.Error
			if errors.As(err, &temporary) && temporary.Timeout() {
				continue
			}
			return err
		}
		c := &mqttClient{server: m, conn: conn, in: bufio.NewReaderSize(conn, 4096), slots: make(chan struct{}, mqttInFlight)}
		if !m.add(c) {
			m.s.Guard.Refused("mqtt", broker.RefusedConnections)
			_ = conn.Close()
			continue
		}
		m.done.Go(func() {
			defer m.remove(c)
			c.serve()
		})
	}
}

func (m *MQTT) add(c *mqttClient) bool {
	m.mu.Lock()
	defer m.mu.Unlock()
	if len(m.clients) >= mqttClientsMax || m.ctx.Err() != nil {
		return false
	}
	m.clients[c] = true
	return true
}

func (m *MQTT) remove(c *mqttClient) {
	m.mu.Lock()
	delete(m.clients, c)
	m.mu.Unlock()
	_ = c.conn.Close()
}

// Check cuts off those whose credential holds no more.
func (m *MQTT) Check() {
	m.mu.Lock()
	defer m.mu.Unlock()
	for c := range m.clients {
		if name, in := c.who(); in && !m.s.Guard.Holds(name) {
			_ = c.conn.Close()
		}
	}
}

// Close cuts all connections and waits for what is on its way to the door.
func (m *MQTT) Close() {
	m.cancel()
	m.mu.Lock()
	for c := range m.clients {
		_ = c.conn.Close()
	}
	m.mu.Unlock()
	m.done.Wait()
}

// A mqttClient is one connection.
type mqttClient struct {
	server *MQTT
	conn   net.Conn
	in     *bufio.Reader
	slots  chan struct{}
	last   chan struct{} // closed when the message before was acknowledged; of the goroutine that reads
	work   sync.WaitGroup

	mu    sync.Mutex
	hello mqttHello
	ok    bool // it said who it is
}

func (c *mqttClient) who() (name string, connected bool) {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.hello.name, c.ok
}

func (c *mqttClient) serve() {
	defer c.work.Wait()
	m := c.server
	if !c.greet() {
		return
	}
	silent := mqttSilentMax
	if c.hello.keepAlive > 0 {
		silent = time.Duration(c.hello.keepAlive) * time.Second * 3 / 2 // 3.1.2.10
	}
	for {
		_ = c.conn.SetReadDeadline(time.Now().Add(silent))
		p, err := readMQTT(c.in, mqttPacketMax)
		if err == nil {
			err = c.handle(p)
		}
		if err != nil {
			c.turnAway(err)
			return
		}
		if m.ctx.Err() != nil {
			return
		}
	}
}

var errMQTTDone = errors.New("disconnected")

// turnAway counts why a connection is ended, where that is worth it.
func (c *mqttClient) turnAway(err error) {
	guard := c.server.s.Guard
	switch {
	case errors.Is(err, errMQTTTooLarge):
		guard.Refused("mqtt", broker.RefusedTooLarge)
		c.server.once.warn("too large", "a sender by MQTT is cut off", "client", cut(c.hello.clientID), "cause", fmt.Sprintf("more than %d bytes in a message", wire.PayloadBytesMax))
	case errors.Is(err, errMQTTProtocol):
		guard.Refused("mqtt", broker.RefusedProtocol)
		c.server.once.warn("protocol", "a sender by MQTT is cut off", "client", cut(c.hello.clientID), "cause", err)
	case errors.Is(err, os.ErrDeadlineExceeded):
		guard.Refused("mqtt", broker.RefusedSilent)
	}
}

// greet takes the first packet and answers it.
func (c *mqttClient) greet() bool {
	guard := c.server.s.Guard
	_ = c.conn.SetReadDeadline(time.Now().Add(mqttConnectWait))
	first, err := c.in.Peek(1)
	if err == nil && first[0] != mqttConnect<<4 {
		err = errMQTTProtocol // do not wait for what a length of another protocol promises
	}
	var p mqttPacket
	if err == nil {
		p, err = readMQTT(c.in, mqttConnectMax)
	}
	var hello mqttHello
	if err == nil {
		hello, err = parseConnect(p.body)
	}
	if err != nil {
		if err.Error() != "EOF" && !errors.Is(err, errMQTTProtocol) && !errors.Is(err, errMQTTTooLarge) && !errors.Is(err, os.ErrDeadlineExceeded) {
			guard.Refused("mqtt", broker.RefusedTLS) // what goes wrong before the first byte is the handshake
		}
		c.turnAway(err)
		return false
	}
	if hello.level == 0 {
		guard.Refused("mqtt", broker.RefusedProtocol)
		c.write(packet(mqttConnack, 0, 0, 1)) // unacceptable protocol version
		return false
	}
	if reason := guard.MaySpeak(hello.name, hello.pass, "", c.conn.RemoteAddr()); reason != "" {
		guard.Refused("mqtt", reason)
		c.write(packet(mqttConnack, 0, 0, 5)) // not authorized
		return false
	}
	c.mu.Lock()
	c.hello, c.ok = hello, true
	c.mu.Unlock()
	return c.write(packet(mqttConnack, 0, 0, 0)) == nil
}

func (c *mqttClient) write(b []byte) error {
	c.mu.Lock()
	defer c.mu.Unlock()
	_ = c.conn.SetWriteDeadline(time.Now().Add(mqttWriteWait))
	_, err := c.conn.Write(b)
	return err
}

func (c *mqttClient) handle(p mqttPacket) error {
	switch p.kind {
	case mqttPublish:
		msg, err := parsePublish(p)
		if err != nil {
			return err
		}
		n := min(1+len(msg.payload)/mqttSlotBytes, mqttInFlight)
		for range n {
			c.slots <- struct{}{}
		}
		before, mine := c.last, make(chan struct{})
		c.last = mine
		c.work.Go(func() {
			defer func() {
				for range n {
					<-c.slots
				}
			}()
			c.publish(msg, before)
			close(mine)
		})
		return nil
	case mqttPubrel:
		if len(p.body) != 2 || p.flags != 2 {
			return errMQTTProtocol
		}
		return c.write(idPacket(mqttPubcomp, uint16(p.body[0])<<8|uint16(p.body[1])))
	case mqttSubscribe, mqttUnsubscribe:
		id, n, err := filtersOf(p)
		if err != nil {
			return err
		}
		if p.kind == mqttUnsubscribe {
			return c.write(idPacket(mqttUnsuback, id))
		}
		c.server.s.Guard.Refused("mqtt", broker.RefusedSubject)
		n = min(n, 100)
		answer := []byte{byte(id >> 8), byte(id)}
		for range n {
			answer = append(answer, 0x80) // failure (3.9.3): nothing is given out here
		}
		return c.write(packet(mqttSuback, 0, answer...))
	case mqttPingreq:
		return c.write(packet(mqttPingresp, 0))
	case mqttDisconnect:
		return errMQTTDone
	}
	return fmt.Errorf("%w: packet %d", errMQTTProtocol, p.kind)
}

// publish brings a message to the door and acknowledges it when it is on disk or refused for good.
// Acknowledgements go out in the order of the messages (4.6).
func (c *mqttClient) publish(m mqttMessage, before <-chan struct{}) {
	settled := c.take(m)
	if before != nil {
		<-before
	}
	if !settled {
		return // the client sends it again on its next connection
	}
	switch m.qos {
	case 1:
		_ = c.write(idPacket(mqttPuback, m.id))
	case 2:
		_ = c.write(idPacket(mqttPubrec, m.id))
	}
}

// stationOf gives the station of a topic, or why there is none.
func stationOf(topic string) (station, why string) {
	station, ok := strings.CutPrefix(topic, mqttTopicHead)
	switch {
	case !ok || strings.Contains(station, "/"):
		return "", "the topic is rad/v1/STATION"
	case station == "":
		return "", "the topic ends before the station's name"
	}
	for i := range len(station) {
		if b := station[i]; (b < 'a' || b > 'z') && (b < '0' || b > '9') && b != '_' && b != '-' {
			return "", "a station's name has letters, digits, _ and -, no dot or space"
		}
	}
	return station, ""
}

func (c *mqttClient) take(m mqttMessage) (settled bool) {
	s := &c.server.s
	if len(m.topic) > mqttTopicMax {
		m.topic = m.topic[:mqttTopicMax]
	}
	station, why := stationOf(m.topic)
	if why != "" {
		s.Guard.Refused("mqtt", broker.RefusedSubject)
		c.server.once.warn("topic", "readings by MQTT under a topic that is no station's", "topic", cut(m.topic), "cause", why)
		if s.Refuse != nil {
			return s.Refuse(c.server.ctx, "", wire.UnknownStation, fmt.Sprintf("mqtt: topic %.60q: %s", m.topic, why), 1, m.payload) == nil
		}
		return true
	}
	if reason := s.Guard.MaySpeak(c.hello.name, c.hello.pass, station, c.conn.RemoteAddr()); reason != "" {
		s.Guard.Refused("mqtt", reason)
		c.server.once.warn("subject "+c.hello.name, "a sender by MQTT may not speak for a station", "name", cut(c.hello.name), "station", cut(station), "cause", reason)
		if reason != broker.RefusedSubject {
			_ = c.conn.Close() // it was revoked
		}
		return reason == broker.RefusedSubject // acknowledged, or the client would send it for ever; nothing of it is kept
	}
	pause := 100 * time.Millisecond
	for {
		a, err := s.Door.Take(c.server.ctx, station, m.payload)
		if err == nil && !a.Retry {
			return true
		}
		if m.qos == 0 || c.server.ctx.Err() != nil {
			return false
		}
		timer := time.NewTimer(pause)
		select {
		case <-timer.C:
		case <-c.server.ctx.Done():
			timer.Stop()
			return false
		}
		pause = min(2*pause, 5*time.Second)
	}
}
