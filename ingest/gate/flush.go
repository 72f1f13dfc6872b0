package gate

import (
	"context"
	"errors"
	"fmt"
	"runtime/debug"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
)

// What REFUSED takes of all stations together: each payload kept costs one sync of the disk, which the journal needs.
const (
	keptPerSecond = 200
	keptBurst     = 2000
)

// A flush is a group of requests that are written to the journal together: one message for each partition they touch.
type flush struct {
	parts    []part // of the partitions touched, in the order of first touch
	place    [broker.Partitions]int
	outcomes []outcome
	kept     []kept
	readings int
	bytes    int
}

// A part is what a flush has for one partition.
type part struct {
	partition int
	groups    []wire.Group
	ack       jetstream.PubAckFuture
	err       error
}

// An outcome is what becomes of one request.
type outcome struct {
	part    int // -1 where nothing of it goes to the journal
	sound   int
	refused []wire.Refusal
	later   RetryReason // empty: it was looked at
}

// kept is a payload on its way to the stream REFUSED.
type kept struct {
	request int
	ack     jetstream.PubAckFuture
}

// run flushes until the queue is closed and empty. One flush is in the air at a time; what comes meanwhile waits for the next.
func (g *Gate) run() {
	defer close(g.done)
	var requests []request
	for g.queue.wait() {
		requests = g.queue.take(requests[:0])
		g.flush(requests)
		clear(requests)
	}
}

func (g *Gate) flush(requests []request) {
	begun := g.s.Now()
	if g.s.DiskLow != nil && g.s.DiskLow() {
		for i := range requests {
			g.later(&requests[i], DiskIsLow)
		}
		return
	}
	if g.s.NoClock != nil && g.s.NoClock() {
		for i := range requests {
			g.later(&requests[i], ClockUnset)
		}
		return
	}
	f := &flush{outcomes: make([]outcome, len(requests))}
	for i := range requests {
		f.outcomes[i] = g.look(f, &requests[i], i, begun)
	}
	g.publish(f, requests)
	g.await(f)
	g.s.Meter.Flushed(f.readings, f.bytes, g.since(begun))
	for i := range requests {
		g.reply(f, &requests[i], &f.outcomes[i])
	}
}

// look takes one payload apart and puts its sound readings where they belong.
func (g *Gate) look(f *flush, r *request, index int, now time.Time) outcome {
	o := outcome{part: -1}
	st := r.station
	switch {
	case st == g.strange:
		o.refused = whole(r, wire.UnknownStation, fmt.Sprintf("no station %.40q in the site file", r.name))
	case !st.rate.open(now, g.s.RatePerSecond, g.s.RateBurst):
		if r.answer != nil {
			o.later = TooFast
			return o
		}
		o.refused = whole(r, wire.RateLimited, fmt.Sprintf("over %g readings a second; nobody waits for an answer, so it is kept here", g.s.RatePerSecond))
	default:
		var readings []minute.Reading
		readings, o.refused = g.takeApart(r)
		o.sound = len(readings)
		st.rate.spend(len(readings) + len(o.refused))
		g.s.Meter.Received(o.sound)
		if o.sound > 0 {
			g.watchClock(r, readings)
			o.part = f.add(st.partition, r.name, readings)
		}
	}
	for i := range o.refused {
		g.s.Meter.Refused(o.refused[i].Reason, 1)
	}
	if len(o.refused) > 0 {
		if g.keep.open(now, keptPerSecond, keptBurst) && st.keep.open(now, g.s.RefusedPerSecond, g.s.RefusedBurst) {
			g.keep.spend(1)
			st.keep.spend(1)
			f.kept = append(f.kept, kept{request: index})
		} else {
			g.s.Meter.RefusedNotKept(1)
		}
	}
	return o
}

// watchClock tells how a station's clock stands to ours: its newest stamp against the time of receipt.
func (g *Gate) watchClock(r *request, readings []minute.Reading) {
	if g.s.Clock == nil {
		return
	}
	newest := readings[0].At
	for i := range readings {
		newest = max(newest, readings[i].At)
	}
	g.s.Clock(r.name, time.Duration(newest-r.received)*time.Microsecond)
}

func whole(r *request, reason wire.Reason, detail string) []wire.Refusal {
	return []wire.Refusal{{Reason: reason, Detail: detail, Index: wire.Whole, End: len(r.payload)}}
}

// takeApart decodes. A payload that makes the decoder panic is set aside like any other that is wrong.
func (g *Gate) takeApart(r *request) (readings []minute.Reading, refused []wire.Refusal) {
	defer func() {
		if p := recover(); p != nil {
			g.s.Log.Error("decoder panicked; the payload is in REFUSED", "station", r.name, "bytes", len(r.payload),
				"panic", fmt.Sprint(p), "stack", string(debug.Stack()))
			readings, refused = nil, whole(r, wire.InternalError, fmt.Sprintf("the decoder panicked: %v", p))
			g.decoder = wire.Decoder{}
		}
	}()
	g.decoder.Check = func(reading *minute.Reading) (wire.Reason, string) { return g.checkStamp(reading, r.received) }
	return g.decode(&g.decoder, r.payload)
}

// checkStamp holds a stamp against the time of receipt: one far ahead is refused, one ahead of what clocks differ is
// marked, one that is too old is refused.
func (g *Gate) checkStamp(reading *minute.Reading, received minute.Stamp) (wire.Reason, string) {
	reading.Received = received
	reading.Ahead = reading.At > received+micros(g.s.AheadMark)
	switch {
	case reading.At > received+micros(g.s.AheadMax):
		return wire.Ahead, fmt.Sprintf("%s is more than %s ahead of the time of receipt, %s: is the logger's clock right",
			wire.AppendTime(nil, reading.At), g.s.AheadMax, wire.AppendTime(nil, received))
	case reading.At < received-micros(g.s.AgeMax):
		return wire.TooOld, fmt.Sprintf("%s is more than %s before the time of receipt, %s: give older readings to judge, as a file",
			wire.AppendTime(nil, reading.At), g.s.AgeMax, wire.AppendTime(nil, received))
	}
	return "", ""
}

func micros(d time.Duration) minute.Stamp { return minute.Stamp(d / time.Microsecond) }

// add puts readings to their partition and station.
func (f *flush) add(partition int, station string, readings []minute.Reading) int {
	k := f.place[partition] - 1
	if k < 0 {
		f.parts = append(f.parts, part{partition: partition})
		k = len(f.parts) - 1
		f.place[partition] = k + 1
	}
	p := &f.parts[k]
	f.readings += len(readings)
	for i := range p.groups {
		if p.groups[i].Station == station {
			p.groups[i].Readings = append(p.groups[i].Readings, readings...)
			return k
		}
	}
	p.groups = append(p.groups, wire.Group{Station: station, Readings: readings})
	return k
}

// publish sends everything without waiting.
func (g *Gate) publish(f *flush, requests []request) {
	for i := range f.parts {
		p := &f.parts[i]
		frame := wire.AppendJournal(nil, p.groups)
		f.bytes += len(frame)
		p.ack, p.err = g.broker.JS.PublishMsgAsync(&nats.Msg{Subject: broker.JournalSubject(p.partition), Data: frame},
			jetstream.WithExpectStream(broker.JournalStream))
	}
	for i := range f.kept {
		k := &f.kept[i]
		m := refusedMessage(&requests[k.request], f.outcomes[k.request].refused)
		var err error
		if k.ack, err = g.broker.JS.PublishMsgAsync(m, jetstream.WithExpectStream(broker.RefusedStream)); err != nil {
			g.s.Meter.RefusedNotKept(1)
		}
	}
}

var errNoAck = errors.New("gate: the broker did not answer in time")

// await waits for the broker to have it all on disk, at most AckWait.
func (g *Gate) await(f *flush) {
	ctx, cancel := context.WithTimeout(context.Background(), g.s.AckWait)
	defer cancel()
	for i := range f.parts {
		if p := &f.parts[i]; p.err == nil {
			p.err = awaitAck(ctx, p.ack)
		}
		if err := f.parts[i].err; err != nil {
			g.s.Log.Warn("readings were not stored; their senders are told to come again", "partition", f.parts[i].partition, "err", err)
		}
	}
	for i := range f.kept {
		if k := &f.kept[i]; k.ack != nil && awaitAck(ctx, k.ack) != nil {
			g.s.Meter.RefusedNotKept(1)
		}
	}
}

func awaitAck(ctx context.Context, ack jetstream.PubAckFuture) error {
	select {
	case <-ack.Ok():
		return nil
	case err := <-ack.Err():
		return err
	case <-ctx.Done():
		return errNoAck
	}
}

func (g *Gate) reply(f *flush, r *request, o *outcome) {
	if o.part >= 0 {
		if err := f.parts[o.part].err; err != nil {
			o.later = BrokerAway
			if broker.Full(err) {
				o.later = JournalFull
			}
		}
	}
	if o.later != "" {
		g.later(r, o.later)
		return
	}
	g.s.Meter.Acked(o.sound)
	if r.answer == nil {
		return
	}
	reply := Reply{OK: len(o.refused) == 0, N: o.sound}
	for i := range o.refused {
		if i == refusedListedMax {
			reply.More = len(o.refused) - i
			break
		}
		reply.Refused = append(reply.Refused, Refused{o.refused[i].Index, o.refused[i].Reason, o.refused[i].Detail})
	}
	r.answer(reply)
}
