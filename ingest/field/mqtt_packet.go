package field

import (
	"bufio"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"unicode/utf8"

	"fluxwarden/ingest/wire"
)

// The control packets of MQTT 3.1.1 (OASIS Standard, 29 October 2014, table 2.1) that a publisher needs.
const (
	mqttConnect = 1 + iota
	mqttConnack
	mqttPublish
	mqttPuback
	mqttPubrec
	mqttPubrel
	mqttPubcomp
	mqttSubscribe
	mqttSuback
	mqttUnsubscribe
	mqttUnsuback
	mqttPingreq
	mqttPingresp
	mqttDisconnect
)

// Limits of one packet.
const (
	mqttTopicMax   = 256
	mqttPacketMax  = wire.PayloadBytesMax + mqttTopicMax + 16
	mqttConnectMax = 4096
)

var (
	errMQTTProtocol = errors.New("not MQTT 3.1.1")
	errMQTTTooLarge = errors.New("a packet that is too large")
)

// A mqttPacket is one control packet as it came.
type mqttPacket struct {
	kind  byte
	flags byte
	body  []byte
}

// readMQTT reads one packet of at most so many bytes.
func readMQTT(in *bufio.Reader, most int) (p mqttPacket, err error) {
	first, err := in.ReadByte()
	if err != nil {
		return p, err
	}
	p.kind, p.flags = first>>4, first&0x0f
	length := 0
	for shift := 0; ; shift += 7 {
		b, err := in.ReadByte()
		if err != nil {
			return p, err
		}
		length |= int(b&0x7f) << shift
		if b&0x80 == 0 {
			break
		}
		if shift == 21 { // four bytes at most (2.2.3)
			return p, fmt.Errorf("%w: remaining length", errMQTTProtocol)
		}
	}
	if length > most {
		return p, errMQTTTooLarge
	}
	p.body = make([]byte, length)
	_, err = io.ReadFull(in, p.body)
	return p, err
}

// A mqttCursor takes the fields of a packet one after another; what is missing makes it bad.
type mqttCursor struct {
	rest []byte
	bad  bool
}

func (c *mqttCursor) byte() byte {
	if len(c.rest) < 1 {
		c.bad = true
		return 0
	}
	b := c.rest[0]
	c.rest = c.rest[1:]
	return b
}

func (c *mqttCursor) word() uint16 {
	if len(c.rest) < 2 {
		c.bad = true
		return 0
	}
	w := binary.BigEndian.Uint16(c.rest)
	c.rest = c.rest[2:]
	return w
}

func (c *mqttCursor) bytes() []byte {
	n := int(c.word())
	if len(c.rest) < n {
		c.bad = true
		return nil
	}
	b := c.rest[:n]
	c.rest = c.rest[n:]
	return b
}

// A mqttHello is what a client says of itself (3.1).
type mqttHello struct {
	level      byte
	keepAlive  uint16 // seconds; 0 is none
	clientID   string
	name, pass string
}

func parseConnect(body []byte) (h mqttHello, err error) {
	c := &mqttCursor{rest: body}
	protocol := string(c.bytes())
	h.level = c.byte()
	flags := c.byte()
	h.keepAlive = c.word()
	if c.bad || (protocol != "MQTT" && protocol != "MQIsdp") {
		return h, fmt.Errorf("%w: connect", errMQTTProtocol)
	}
	if protocol != "MQTT" || h.level != 4 {
		h.level = 0 // another version: answered, not cut off
		return h, nil
	}
	if flags&1 != 0 || (flags&0x04 == 0 && flags&0x38 != 0) || flags&0x18 == 0x18 || (flags&0x80 == 0 && flags&0x40 != 0) {
		return h, fmt.Errorf("%w: connect flags", errMQTTProtocol)
	}
	h.clientID = string(c.bytes())
	if flags&0x04 != 0 { // a will: nobody here is told when a station goes
		c.bytes()
		c.bytes()
	}
	if flags&0x80 != 0 {
		h.name = string(c.bytes())
	}
	if flags&0x40 != 0 {
		h.pass = string(c.bytes())
	}
	if c.bad || len(c.rest) != 0 || !utf8.ValidString(h.clientID) || !utf8.ValidString(h.name) {
		return h, fmt.Errorf("%w: connect", errMQTTProtocol)
	}
	return h, nil
}

// A mqttMessage is one publish (3.3).
type mqttMessage struct {
	topic   string
	qos     byte
	id      uint16 // with QoS 1 and 2
	payload []byte
}

func parsePublish(p mqttPacket) (m mqttMessage, err error) {
	m.qos = p.flags >> 1 & 3
	c := &mqttCursor{rest: p.body}
	m.topic = string(c.bytes())
	if m.qos > 0 {
		m.id = c.word()
	}
	m.payload = c.rest
	if c.bad || m.qos == 3 || (m.qos > 0 && m.id == 0) || !utf8.ValidString(m.topic) {
		return m, fmt.Errorf("%w: publish", errMQTTProtocol)
	}
	return m, nil
}

// filtersOf counts the filters of a subscribe or unsubscribe (3.8, 3.10).
func filtersOf(p mqttPacket) (id uint16, filters int, err error) {
	c := &mqttCursor{rest: p.body}
	id = c.word()
	for len(c.rest) > 0 && !c.bad {
		c.bytes()
		if p.kind == mqttSubscribe {
			c.byte()
		}
		filters++
	}
	if c.bad || filters == 0 || id == 0 || p.flags != 2 {
		return 0, 0, fmt.Errorf("%w: subscribe", errMQTTProtocol)
	}
	return id, filters, nil
}

// packet is a short packet as it is sent.
func packet(kind, flags byte, body ...byte) []byte {
	return append([]byte{kind<<4 | flags, byte(len(body))}, body...)
}

func idPacket(kind byte, id uint16) []byte { return packet(kind, 0, byte(id>>8), byte(id)) }
