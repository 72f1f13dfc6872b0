//go:build linux

package field

import (
	"context"
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"net"
	"os"
	"strings"
	"testing"
	"time"

	"golang.org/x/sys/unix"

	"fluxwarden/rules"
)

// A digitalPyranometer is an invented instrument with registers, for tests: 2 irradiance in 0.1 W/m2, 6 body temperature as a float whose low
// word comes first, 10 a serial number of 32 bits, 20 (input registers) the mark for no value. Written from the Modbus specification V1.1b3, with
// no part of the library that is tested with it.
type digitalPyranometer struct {
	device byte
	silent func() bool // says nothing; nil: never
}

func (p *digitalPyranometer) register(input bool, address int) uint16 {
	body := math.Float32bits(18.25)
	minus := int16(-12)
	switch {
	case input && address == 20:
		return 0x8000
	case input:
		return 0
	case address == 2:
		return uint16(minus)
	case address == 3:
		return 8015
	case address == 6:
		return uint16(body)
	case address == 7:
		return uint16(body >> 16)
	case address == 10:
		return 0x0001
	case address == 11:
		return 0x86a0
	}
	return 0
}

// answer gives the answer to one request without frame; nil for none.
func (p *digitalPyranometer) answer(device byte, request []byte) []byte {
	if device != p.device || (p.silent != nil && p.silent()) {
		return nil
	}
	if len(request) != 5 || (request[0] != 3 && request[0] != 4) {
		return []byte{request[0] | 0x80, 1}
	}
	first, n := int(binary.BigEndian.Uint16(request[1:])), int(binary.BigEndian.Uint16(request[3:]))
	if n < 1 || n > 125 || first+n > 100 {
		return []byte{request[0] | 0x80, 2}
	}
	out := []byte{request[0], byte(2 * n)}
	for i := range n {
		out = binary.BigEndian.AppendUint16(out, p.register(request[0] == 4, first+i))
	}
	return out
}

func (p *digitalPyranometer) tcp(c io.ReadWriter) {
	head := make([]byte, 7)
	for {
		if _, err := io.ReadFull(c, head); err != nil {
			return
		}
		body := make([]byte, max(int(binary.BigEndian.Uint16(head[4:]))-1, 0))
		if _, err := io.ReadFull(c, body); err != nil {
			return
		}
		if a := p.answer(head[6], body); a != nil {
			out := binary.BigEndian.AppendUint16(append([]byte(nil), head[:4]...), uint16(len(a)+1))
			_, _ = c.Write(append(append(out, head[6]), a...))
		}
	}
}

func (p *digitalPyranometer) rtu(c io.ReadWriter) {
	frame := make([]byte, 8)
	for {
		if _, err := io.ReadFull(c, frame); err != nil {
			return
		}
		if binary.LittleEndian.Uint16(frame[6:]) != crc16(frame[:6]) {
			continue
		}
		if a := p.answer(frame[0], frame[1:6]); a != nil {
			out := append([]byte{frame[0]}, a...)
			_, _ = c.Write(binary.LittleEndian.AppendUint16(out, crc16(out)))
		}
	}
}

// crc16 is the check of a serial frame (Modbus over serial line V1.02, 6.2.2).
func crc16(b []byte) uint16 {
	crc := uint16(0xffff)
	for _, x := range b {
		crc ^= uint16(x)
		for range 8 {
			if crc&1 != 0 {
				crc = crc>>1 ^ 0xa001
			} else {
				crc >>= 1
			}
		}
	}
	return crc
}

// pty gives both ends of a serial line: one to hold, one to open by name.
func pty(t *testing.T) (*os.File, string) {
	t.Helper()
	master, err := os.OpenFile("/dev/ptmx", os.O_RDWR|unix.O_NOCTTY, 0)
	if err != nil {
		t.Skipf("no pseudo-terminal to stand for a serial line: %v", err)
	}
	fd := int(master.Fd())
	if err := unix.IoctlSetPointerInt(fd, unix.TIOCSPTLCK, 0); err != nil {
		t.Fatal(err)
	}
	n, err := unix.IoctlGetInt(fd, unix.TIOCGPTN)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { master.Close() })
	return master, fmt.Sprintf("/dev/pts/%d", n)
}

func listenModbus(t *testing.T, serve func(io.ReadWriter)) string {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { l.Close() })
	go func() {
		for {
			c, err := l.Accept()
			if err != nil {
				return
			}
			go serve(c)
		}
	}()
	return l.Addr().String()
}

func devicesOf(t *testing.T, url string) []rules.ModbusDevice {
	t.Helper()
	site, err := rules.Parse("site.yaml", []byte(`network: {id: n}
stations:
  - id: northmoor
    latitude: 1
    longitude: 2
    elevation: 3
    instruments: [{id: G, measures: global, input: {irradiance: g1_wm2}}]
    modbus:
      - url: `+url+`
        device: 3
        timeout: 10s
        registers:
          g1_low_wm2: {address: 2, type: int16, scale: 0.1}
          g1_wm2: {address: 3, type: uint16, scale: 0.1, unit: W/m2}
          g1_body_c: {address: 6, type: float32, words: low_first}
          g1_serial: {address: 10, type: uint32, offset: 1}
          g1_tilt: {address: 20, table: input, type: int16, missing: -32768}
`))
	if err != nil {
		t.Fatal(err)
	}
	return site.Stations[0].Modbus
}

func TestADigitalPyranometerIsPolledOnTheSecond(t *testing.T) {
	p := &digitalPyranometer{device: 3}
	master, name := pty(t)
	go p.rtu(master)
	for _, url := range []string{"tcp://" + listenModbus(t, p.tcp), "rtuovertcp://" + listenModbus(t, p.rtu), "rtu://" + name} {
		door := &testDoor{}
		ctx, cancel := context.WithCancel(t.Context())
		done := make(chan struct{})
		go func() {
			defer close(done)
			NewModbusPoller(ModbusSettings{Station: "northmoor", Devices: devicesOf(t, url), Door: door}).Run(ctx)
		}()
		waitFor(t, url, func() bool { return len(door.of("northmoor")) >= 2 })
		cancel()
		<-done
		readings := door.of("northmoor")
		for i, r := range readings {
			var got []string
			for _, v := range r.Values {
				got = append(got, fmt.Sprintf("%s=%.6g", v.Channel, v.Mean))
			}
			if text := strings.Join(got, " "); text != "g1_low_wm2=-1.2 g1_wm2=801.5 g1_body_c=18.25 g1_serial=100001" {
				t.Errorf("%s: %s", url, text)
			}
			if r.At%1_000_000 != 0 || (i > 0 && r.At <= readings[i-1].At) {
				t.Errorf("%s: stamps are not on the second, one each: %d", url, r.At)
			}
		}
	}
}

// One device that says nothing is counted and asked again; when it is back, so are its readings.
func TestADeviceThatIsSilentIsAskedAgain(t *testing.T) {
	silent := make(chan struct{})
	p := &digitalPyranometer{device: 3, silent: func() bool {
		select {
		case <-silent:
			return false
		default:
			return true
		}
	}}
	devices := devicesOf(t, "tcp://"+listenModbus(t, p.tcp))
	devices[0].Timeout = 300 * time.Millisecond
	door, failed := &testDoor{}, make(chan struct{}, 100)
	poller := NewModbusPoller(ModbusSettings{Station: "northmoor", Devices: devices, Door: door, Failed: func() { failed <- struct{}{} }})
	go poller.Run(t.Context())
	<-failed
	close(silent)
	waitFor(t, "a reading", func() bool { return len(door.of("northmoor")) > 0 })
}

func waitFor(t *testing.T, what string, f func() bool) {
	t.Helper()
	for began := time.Now(); !f(); time.Sleep(5 * time.Millisecond) {
		if time.Since(began) > time.Minute {
			t.Fatalf("%s never came about", what)
		}
	}
}

func FuzzModbusNumber(f *testing.F) {
	f.Add("float32", true, uint16(0x4192), uint16(0), uint16(0), uint16(0), 0.1, 0.0)
	f.Fuzz(func(t *testing.T, kind string, low bool, a, b, c, d uint16, scale, offset float64) {
		v := rules.ModbusValue{Type: kind, LowFirst: low, Scale: scale, Offset: offset, Missing: math.NaN()}
		if x, ok := modbusNumber(&v, []uint16{a, b, c, d}[:v.Registers()]); ok && (math.IsNaN(x) || math.IsInf(x, 0)) {
			t.Fatalf("%g is taken for a value", x)
		}
	})
}
