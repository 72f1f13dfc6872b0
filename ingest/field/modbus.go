package field

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log"
	"log/slog"
	"math"
	"time"

	"github.com/simonvetter/modbus"

	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// Bounds of polling.
const (
	modbusBlockMax = 120  // registers asked for at once; the protocol allows 125
	modbusGapMax   = 8    // registers between two numbers that are read along
	modbusHeldMax  = 7200 // readings that wait for the door; the oldest go first
)

// ModbusSettings say which devices of a station are asked and where what becomes of it is told.
type ModbusSettings struct {
	Station string
	Devices []rules.ModbusDevice
	Door    Door
	Now     func() time.Time // nil is the system's clock
	Failed  func()           // counts polls that gave nothing; optional
	Lost    func(readings int)
	Log     *slog.Logger
}

// A ModbusPoller asks the devices on the second and brings each second's values as one reading a device.
type ModbusPoller struct {
	s     ModbusSettings
	once  once
	ready chan minute.Reading
}

// NewModbusPoller makes a poller; Run starts it.
func NewModbusPoller(s ModbusSettings) *ModbusPoller {
	if s.Now == nil {
		s.Now = time.Now
	}
	if s.Log == nil {
		s.Log = slog.New(slog.DiscardHandler)
	}
	return &ModbusPoller{s: s, once: once{log: s.Log}, ready: make(chan minute.Reading, modbusHeldMax)}
}

// Run polls until ctx ends. Devices on one line are asked one after another.
func (p *ModbusPoller) Run(ctx context.Context) {
	lines := map[string][]*rules.ModbusDevice{}
	for i := range p.s.Devices {
		d := &p.s.Devices[i]
		lines[d.URL] = append(lines[d.URL], d)
	}
	for _, devices := range lines {
		go p.poll(ctx, devices)
	}
	p.bring(ctx)
}

// poll asks the devices of one line, each when its time has come.
func (p *ModbusPoller) poll(ctx context.Context, devices []*rules.ModbusDevice) {
	var client *modbus.ModbusClient
	defer func() { closeModbus(client) }()
	for {
		now := p.s.Now()
		next := now.Truncate(time.Second).Add(time.Second)
		timer := time.NewTimer(next.Sub(now))
		select {
		case <-ctx.Done():
			timer.Stop()
			return
		case <-timer.C:
		}
		for _, d := range devices {
			if next.Unix()%int64(d.Every/time.Second) != 0 {
				continue
			}
			var err error
			if client == nil {
				client, err = openModbus(d)
			}
			var reading minute.Reading
			if err == nil {
				reading, err = readModbus(client, d, minute.Stamp(next.UnixMicro()))
			}
			if err != nil {
				closeModbus(client)
				client = nil
				p.failed(d, err)
				continue
			}
			p.keep(reading)
		}
	}
}

func (p *ModbusPoller) failed(d *rules.ModbusDevice, err error) {
	if p.s.Failed != nil {
		p.s.Failed()
	}
	p.once.warn(fmt.Sprint(d.URL, d.Device), "a device does not answer; it is asked again", "station", p.s.Station, "url", d.URL, "device", d.Device, "cause", err)
}

// keep puts a reading where the door fetches it; where too many wait, the oldest goes.
func (p *ModbusPoller) keep(r minute.Reading) {
	for {
		select {
		case p.ready <- r:
			return
		default:
		}
		select {
		case <-p.ready:
			if p.s.Lost != nil {
				p.s.Lost(1)
			}
			p.once.warn("lost", "readings of Modbus devices are lost: the journal has not taken any for too long", "station", p.s.Station)
		default:
		}
	}
}

// bring takes what was read to the door.
func (p *ModbusPoller) bring(ctx context.Context) {
	pause := retryFirst
	var batch []minute.Reading
	for {
		if len(batch) == 0 {
			select {
			case <-ctx.Done():
				return
			case r := <-p.ready:
				batch = append(batch, r)
			}
		}
	more:
		for len(batch) < batchReadings {
			select {
			case r := <-p.ready:
				batch = append(batch, r)
			default:
				break more
			}
		}
		a, err := p.s.Door.Take(ctx, p.s.Station, wire.EncodeJSON(nil, batch))
		if err == nil && !a.Retry {
			if len(a.Refused) > 0 {
				p.once.warn("refused "+a.Refused[0].Reason, "readings of Modbus devices are refused", "station", p.s.Station, "reason", a.Refused[0].Reason, "detail", a.Refused[0].Detail)
			}
			batch, pause = batch[:0], retryFirst
			continue
		}
		timer := time.NewTimer(pause)
		select {
		case <-ctx.Done():
			timer.Stop()
			return
		case <-timer.C:
		}
		pause = min(2*pause, retryMost)
	}
}

func openModbus(d *rules.ModbusDevice) (*modbus.ModbusClient, error) {
	parity := map[string]uint{"none": modbus.PARITY_NONE, "even": modbus.PARITY_EVEN, "odd": modbus.PARITY_ODD}[d.Parity]
	client, err := modbus.NewClient(&modbus.ClientConfiguration{URL: d.URL, Speed: d.Baud, DataBits: 8, Parity: parity, StopBits: d.StopBits,
		Timeout: d.Timeout, Logger: log.New(io.Discard, "", 0)})
	if err != nil {
		return nil, err
	}
	if err := client.Open(); err != nil {
		return nil, err
	}
	return client, nil
}

func closeModbus(c *modbus.ModbusClient) {
	if c != nil {
		_ = c.Close() // it is opened anew
	}
}

// readModbus reads all values of a device, neighbours at once.
func readModbus(c *modbus.ModbusClient, d *rules.ModbusDevice, at minute.Stamp) (minute.Reading, error) {
	r := minute.Reading{At: at}
	if err := c.SetUnitId(d.Device); err != nil {
		return r, err
	}
	for i := 0; i < len(d.Values); {
		first, end := &d.Values[i], int(d.Values[i].Address)+d.Values[i].Registers()
		n := i + 1
		for n < len(d.Values) && d.Values[n].Input == first.Input && int(d.Values[n].Address) <= end+modbusGapMax &&
			int(d.Values[n].Address)+d.Values[n].Registers()-int(first.Address) <= modbusBlockMax {
			end = max(end, int(d.Values[n].Address)+d.Values[n].Registers())
			n++
		}
		kind := modbus.HOLDING_REGISTER
		if first.Input {
			kind = modbus.INPUT_REGISTER
		}
		words, err := c.ReadRegisters(first.Address, uint16(end-int(first.Address)), kind)
		if err != nil {
			return r, err
		}
		if len(words) < end-int(first.Address) {
			return r, errors.New("fewer registers came than were asked for")
		}
		for ; i < n; i++ {
			v := &d.Values[i]
			at := int(v.Address) - int(first.Address)
			if x, ok := modbusNumber(v, words[at:at+v.Registers()]); ok {
				r.Values = append(r.Values, minute.ChannelValue{Channel: v.Channel, Value: minute.Single(x)})
			}
		}
	}
	return r, nil
}

// modbusNumber is the value in some registers; false where they hold the mark for none, or no finite number.
func modbusNumber(v *rules.ModbusValue, words []uint16) (float64, bool) {
	var bits uint64
	for i := range words {
		w := words[i]
		if v.LowFirst {
			w = words[len(words)-1-i]
		}
		bits = bits<<16 | uint64(w)
	}
	var raw float64
	switch v.Type {
	case "uint16", "uint32", "uint64":
		raw = float64(bits)
	case "int16":
		raw = float64(int16(bits))
	case "int32":
		raw = float64(int32(bits))
	case "int64":
		raw = float64(int64(bits))
	case "float32":
		raw = float64(math.Float32frombits(uint32(bits)))
	case "float64":
		raw = math.Float64frombits(bits)
	}
	x := raw*v.Scale + v.Offset
	if raw == v.Missing || math.IsNaN(x) || math.IsInf(x, 0) {
		return 0, false
	}
	return x, true
}
