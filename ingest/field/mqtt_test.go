package field

import (
	"bufio"
	"bytes"
	"context"
	"fmt"
	"io"
	"log/slog"
	"net"
	"os/exec"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"

	"fluxwarden/ingest/wire"
)

type mqttHouse struct {
	*testing.T
	door    *testDoor
	guard   *testGuard
	server  *MQTT
	address string
	refused chan string
}

func openMQTT(t *testing.T) *mqttHouse {
	t.Helper()
	h := &mqttHouse{T: t, door: &testDoor{}, guard: &testGuard{}, refused: make(chan string, 100)}
	h.server = NewMQTT(MQTTSettings{Door: h.door, Guard: h.guard, Log: slog.New(slog.DiscardHandler),
		Refuse: func(_ context.Context, _ string, reason wire.Reason, detail string, _ int, _ []byte) error {
			h.refused <- string(reason) + " " + detail
			return nil
		}})
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	h.address = l.Addr().String()
	go h.server.Serve(l)
	t.Cleanup(func() { l.Close(); h.server.Close() })
	return h
}

func (h *mqttHouse) client(name, secret string) (mqtt.Client, error) {
	o := mqtt.NewClientOptions().AddBroker("tcp://" + h.address).SetClientID("test").SetUsername(name).SetPassword(secret).SetAutoReconnect(false).
		SetConnectTimeout(time.Minute).SetCleanSession(true)
	c := mqtt.NewClient(o)
	t := c.Connect()
	t.Wait()
	h.Cleanup(func() { c.Disconnect(0) })
	return c, t.Error()
}

func (h *mqttHouse) publish(c mqtt.Client, topic string, qos byte, payload string) {
	h.Helper()
	if t := c.Publish(topic, qos, false, payload); !t.WaitTimeout(time.Minute) || t.Error() != nil {
		h.Fatalf("%s: %v", topic, t.Error())
	}
}

// With QoS 1 and 2 the acknowledgement comes after the door has taken the reading, never before.
func TestMQTTAcknowledgesWhatIsOnDisk(t *testing.T) {
	h := openMQTT(t)
	c, err := h.client("northmoor-1", "s3cret")
	if err != nil {
		t.Fatal(err)
	}
	var tries atomic.Int32
	h.door.answer = func(string, []byte) (Answer, error) {
		if tries.Add(1) < 3 {
			return Answer{Retry: true, Reason: "journal_full"}, nil
		}
		return Answer{}, nil
	}
	h.publish(c, "rad/v1/northmoor", 1, oneReading)
	if n := len(h.door.of("northmoor")); n != 1 || tries.Load() != 3 {
		t.Errorf("acknowledged with %d readings on disk after %d tries", n, tries.Load())
	}
	h.publish(c, "rad/v1/northmoor", 2, oneReading)
	h.publish(c, "rad/v1/northmoor", 0, oneReading)
	var tokens []mqtt.Token
	for i := range 200 { // many on their way at once
		tokens = append(tokens, c.Publish("rad/v1/northmoor", 1, false, strings.Replace(oneReading, "8.213", fmt.Sprint(i), 1)))
	}
	for _, token := range tokens {
		if !token.WaitTimeout(time.Minute) || token.Error() != nil {
			t.Fatal(token.Error())
		}
	}
	waitFor(t, "203 readings", func() bool { return len(h.door.of("northmoor")) == 203 })
}

func TestMQTTRefuses(t *testing.T) {
	h := openMQTT(t)
	for _, c := range []struct{ name, secret, reason string }{{"northmoor-1", "guess", "wrong_credential"}, {"", "", "no_credential"}} {
		if _, err := h.client(c.name, c.secret); err == nil || h.guard.count("mqtt", c.reason) == 0 {
			t.Errorf("%s: let in: %v", c.reason, err)
		}
	}
	c, err := h.client("northmoor-1", "s3cret")
	if err != nil {
		t.Fatal(err)
	}
	for topic, why := range map[string]string{"rad/v1/north.moor": "no dot or space", "rad/v1/north moor": "no dot or space", "rad/v1/": "ends before", "rad/v1/a/b": "rad/v1/STATION",
		"other": "rad/v1/STATION"} {
		h.publish(c, topic, 1, oneReading) // acknowledged, or the client would send it for ever; and kept in REFUSED
		if text := <-h.refused; !strings.Contains(text, why) {
			t.Errorf("%s: %s", topic, text)
		}
	}
	h.publish(c, "rad/v1/southmoor", 1, oneReading)
	if h.guard.count("mqtt", "subject") != 6 || len(h.door.of("southmoor")) != 0 {
		t.Errorf("%d counted as subject", h.guard.count("mqtt", "subject"))
	}
	if s := c.Subscribe("#", 1, nil); s.WaitTimeout(time.Minute) && s.Error() == nil && s.(*mqtt.SubscribeToken).Result()["#"] != 0x80 {
		t.Error("a subscription is granted")
	}
	h.publish(c, "rad/v1/northmoor", 1, "not json") // answered by the door
	h.guard.mu.Lock()
	h.guard.revoked = true
	h.guard.mu.Unlock()
	h.server.Check()
	waitFor(t, "the revoked one is cut off", func() bool { return !c.IsConnected() })
	if _, err := h.client("northmoor-1", "s3cret"); err == nil {
		t.Error("a revoked one is let in")
	}
}

func TestMQTTCutsOffWhatIsNotMQTT(t *testing.T) {
	h := openMQTT(t)
	hello := append([]byte{0x10, 0}, "\x00\x04MQTT\x04\xc2\x00\x01\x00\x01a\x00\x0bnorthmoor-1\x00\x06s3cret"...)
	hello[1] = byte(len(hello) - 2)
	version5 := append([]byte{0x10, 13}, "\x00\x04MQTT\x05\x02\x00\x3c\x00\x00\x01a"...)
	for _, c := range []struct{ name, sent, answer, reason string }{
		{"garbage", "GET / HTTP/1.1\r\n\r\n", "", "protocol"},
		{"version 5", string(version5), "\x20\x02\x00\x01", "protocol"},
		{"too large", string(hello) + "\x30\xff\xff\xff\x7f", "\x20\x02\x00\x00", "too_large"},
		{"remaining length of five bytes", string(hello) + "\x30\xff\xff\xff\xff\x01", "\x20\x02\x00\x00", "protocol"},
		{"publish without a number", string(hello) + "\x32\x04\x00\x02ab", "\x20\x02\x00\x00", "protocol"},
		{"silence within the keep-alive", string(hello), "\x20\x02\x00\x00", "silent"}, // of one second
	} {
		before := h.guard.count("mqtt", c.reason)
		conn, err := net.Dial("tcp", h.address)
		if err != nil {
			t.Fatal(err)
		}
		_ = conn.SetDeadline(time.Now().Add(time.Minute))
		_, _ = io.WriteString(conn, c.sent)
		got, _ := io.ReadAll(conn)
		conn.Close()
		if string(got) != c.answer || h.guard.count("mqtt", c.reason) != before+1 {
			t.Errorf("%s: answered %q, %s counted %d times", c.name, got, c.reason, h.guard.count("mqtt", c.reason)-before)
		}
	}
}

func TestMQTTByMosquitto(t *testing.T) {
	pub, err := exec.LookPath("mosquitto_pub")
	if err != nil {
		t.Skip("mosquitto_pub is not installed (Debian: mosquitto-clients)")
	}
	h := openMQTT(t)
	host, port, _ := net.SplitHostPort(h.address)
	for _, qos := range []string{"0", "1", "2"} {
		out, err := exec.Command(pub, "-h", host, "-p", port, "-V", "mqttv311", "-u", "northmoor-1", "-P", "s3cret", "-q", qos, "-t", "rad/v1/northmoor", "-m", oneReading).CombinedOutput()
		if err != nil {
			t.Fatalf("qos %s: %v: %s", qos, err, out)
		}
	}
	waitFor(t, "three readings", func() bool { return len(h.door.of("northmoor")) == 3 })
	if out, err := exec.Command(pub, "-h", host, "-p", port, "-u", "northmoor-1", "-P", "guess", "-q", "1", "-t", "rad/v1/northmoor", "-m", "x").CombinedOutput(); err == nil {
		t.Errorf("a wrong password is let in: %s", out)
	}
}

func FuzzMQTTPacket(f *testing.F) {
	f.Add([]byte("\x10\x10\x00\x04MQTT\x04\x02\x00\x3c\x00\x04test"))
	f.Add([]byte("\x32\x16\x00\x10rad/v1/northmoor\x00\x01{}"))
	f.Add([]byte("\x82\x06\x00\x01\x00\x01#\x00"))
	f.Fuzz(func(t *testing.T, stream []byte) {
		in := bufio.NewReader(bytes.NewReader(stream))
		for {
			p, err := readMQTT(in, mqttConnectMax)
			if err != nil {
				return
			}
			switch p.kind {
			case mqttConnect:
				_, _ = parseConnect(p.body)
			case mqttPublish:
				if m, err := parsePublish(p); err == nil {
					if station, why := stationOf(m.topic); why == "" && (m.topic != mqttTopicHead+station || strings.ContainsAny(station, "./ *>")) {
						t.Fatalf("topic %q is taken for station %q", m.topic, station)
					}
				}
			case mqttSubscribe, mqttUnsubscribe:
				_, _, _ = filtersOf(p)
			}
		}
	})
}
