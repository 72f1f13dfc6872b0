package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"sync"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/gate"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/synth"
	"fluxwarden/rules"
)

// demoStepMax bounds how much station time is sent at once: a reading further ahead of the clock than two minutes would be marked.
const demoStepMax = minute.Stamp(60 * minute.MicrosPerSecond)

// demoSenders are the synthetic stations and the connection that they send over.
type demoSenders struct {
	link     *broker.Broker
	clock    *demoClock
	stations []*demoStation
}

// A demoStation is one station's logger.
type demoStation struct {
	*synth.Station
	id      string
	next    minute.Stamp
	planned int64 // the day up to which its faults are put in
	plan    []demoFault
	payload []byte
}

// A demoFault is one that comes every so many days at an hour of the day.
type demoFault struct {
	station         string
	kind            rules.FaultKind
	instrument      string
	afterMinutes    int // since the demo's begin, and of each further round
	lastsMinutes    int
	amount, towards float64
}

// demoRoundDays is after how many days the faults come again.
const demoRoundDays = 2

// demoFaults begin with what shows at once, so that a visitor sees something within a minute.
var demoFaults = []demoFault{
	{"larkmoor", rules.SignalLost, "P1", 24, 100, 0, 0},
	{"redbasin", rules.PolarityReversed, "G1", 45, 75, 0, 0},
	{"whitecape", rules.SignalFrozen, "L1", 80, 110, 0, 0},
	{"redbasin", rules.ShadeOff, "D1", 190, 120, 0, 0},
	{"larkmoor", rules.DataGap, "", 230, 35, 0, 0},
	{"whitecape", rules.UnitSlip, "G1", 330, 120, 0, 0},
	{"redbasin", rules.ThermistorBad, "L1", 420, 160, 9, 0},
	{"whitecape", rules.Noise, "D1", 1500, 240, 60, 0},
	{"larkmoor", rules.ChannelsSwapped, "G1", 1560, 180, 0, 0},
	{"redbasin", rules.PointingLost, "", 1640, 200, 0, 0},
	{"whitecape", rules.SensorTilted, "G1", 1900, 700, 4, 210},
}

var demoClimates = map[string]synth.Climate{"larkmoor": synth.Maritime, "redbasin": synth.Desert, "whitecape": synth.Polar}

func newDemoSenders(site *rules.Site, seed uint64, url string, clock *demoClock) (*demoSenders, error) {
	link, err := broker.Connect(broker.ConnectSettings{URL: url, Name: "the demo's stations"})
	if err != nil {
		return nil, err
	}
	s := &demoSenders{link: link, clock: clock}
	for i := range site.Stations {
		id := site.Stations[i].ID
		st := &demoStation{Station: synth.New(&site.Stations[i], seed, demoClimates[id]), id: id, planned: -1}
		for _, f := range demoFaults {
			if f.station == id {
				st.plan = append(st.plan, f)
			}
		}
		st.next = st.Next(clock.at() + 1)
		s.stations = append(s.stations, st)
	}
	return s, nil
}

func (s *demoSenders) close() { s.link.Close() }

// sendUntil sends what the stations' loggers write up to a time, and moves the clock there. The clock moves when the readings are
// on disk, so the daemon never waits in vain.
func (s *demoSenders) sendUntil(ctx context.Context, until minute.Stamp) error {
	for s.clock.at() < until {
		to := min(until, s.clock.at()+demoStepMax)
		var all sync.WaitGroup
		failed := make([]error, len(s.stations))
		for i, st := range s.stations {
			all.Go(func() { failed[i] = st.send(ctx, s.link, to) })
		}
		all.Wait()
		if err := errors.Join(failed...); err != nil {
			return err
		}
		s.clock.micros.Store(int64(to))
	}
	return nil
}

// send publishes the records that are complete by a time as one request, and waits until they are on disk.
func (st *demoStation) send(ctx context.Context, link *broker.Broker, to minute.Stamp) error {
	lag := st.Interval() // a record labelled by its start is complete an interval later
	if st.Rules().Time.LabelEnd {
		lag = 0
	}
	var readings []minute.Reading
	for ; st.next+lag <= to; st.next += st.Interval() {
		if err := st.planFaults(st.next); err != nil {
			return err
		}
		if r := st.Reading(st.next); len(r.Values) > 0 {
			readings = append(readings, r)
		}
	}
	if len(readings) == 0 {
		return nil
	}
	st.payload = wire.EncodeJSON(st.payload[:0], readings)
	return request(ctx, link, st.id, st.payload)
}

// planFaults puts in the faults of the round that a time falls into.
func (st *demoStation) planFaults(at minute.Stamp) error {
	begin := minute.Stamp(demoBegins.UnixMicro())
	round := minute.FloorDiv(int64(at-begin), demoRoundDays*minute.MicrosPerDay)
	if round <= st.planned {
		return nil
	}
	st.planned = round
	for _, f := range st.plan {
		from := begin + minute.Stamp(round)*demoRoundDays*minute.MicrosPerDay + minute.Stamp(f.afterMinutes)*minute.MicrosPerMinute
		err := st.AddFault(synth.Fault{Kind: f.kind, Instrument: f.instrument, From: from,
			To: from + minute.Stamp(f.lastsMinutes)*minute.MicrosPerMinute, Amount: f.amount, TowardsDeg: f.towards})
		if err != nil {
			return fmt.Errorf("station %s: %w", st.id, err)
		}
	}
	return nil
}

const (
	requestWait  = 5 * time.Second
	requestPause = 100 * time.Millisecond
	requestTries = 50
)

// request is what a logger does: send, wait for the answer, send again where the answer says so or none comes.
func request(ctx context.Context, link *broker.Broker, station string, payload []byte) error {
	var last error
	for range requestTries {
		reply, err := ask(ctx, link, station, payload)
		switch {
		case err == nil && reply.OK:
			return nil
		case err == nil && !reply.Retry:
			return fmt.Errorf("station %s: readings were refused: %+v", station, reply.Refused)
		case err == nil:
			last = fmt.Errorf("station %s: told to come again: %s", station, reply.Reason)
		default:
			last = fmt.Errorf("station %s: %w", station, err)
		}
		select {
		case <-ctx.Done():
			return errors.Join(ctx.Err(), last)
		case <-time.After(requestPause):
		}
	}
	return last
}

func ask(ctx context.Context, link *broker.Broker, station string, payload []byte) (gate.Reply, error) {
	ctx, cancel := context.WithTimeout(ctx, requestWait)
	defer cancel()
	var reply gate.Reply
	msg, err := link.Conn.RequestWithContext(ctx, gate.SubjectPrefix+station, payload)
	if err != nil {
		return reply, err
	}
	if err := json.Unmarshal(msg.Data, &reply); err != nil {
		return reply, fmt.Errorf("answer %q: %w", msg.Data, err)
	}
	return reply, nil
}
