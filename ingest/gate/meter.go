package gate

import (
	"sync"
	"sync/atomic"
	"time"

	"fluxwarden/ingest/wire"
)

// A Meter is told what the gate does. Its methods are called from several goroutines and must not wait.
type Meter interface {
	Received(readings int)                                // taken apart, sound ones only
	Acked(readings int)                                   // on disk
	Refused(reason wire.Reason, readings int)             // a payload that is refused whole counts as one
	Retried(reason RetryReason, messages int)             // told to come again
	Unanswered(messages int)                              // came without a reply subject
	Dropped(reason RetryReason, messages int)             // of those, could not be stored and are gone
	RefusedNotKept(messages int)                          // refused and over the bound of what REFUSED takes of a station
	Flushed(readings, frameBytes int, took time.Duration) // one flush was answered by the broker, well or not
}

// Counters is a Meter of plain numbers.
type Counters struct {
	ReceivedReadings, AckedReadings, UnansweredMessages, NotKeptMessages atomic.Int64
	Flushes, FlushedReadings, FlushedBytes, FlushNanos                   atomic.Int64

	mu      sync.Mutex
	refused map[wire.Reason]int64
	retried map[RetryReason]int64
	dropped map[RetryReason]int64
}

// Received implements Meter, as do the others.
func (c *Counters) Received(n int) { c.ReceivedReadings.Add(int64(n)) }

// Acked implements Meter.
func (c *Counters) Acked(n int) { c.AckedReadings.Add(int64(n)) }

// Unanswered implements Meter.
func (c *Counters) Unanswered(n int) { c.UnansweredMessages.Add(int64(n)) }

// RefusedNotKept implements Meter.
func (c *Counters) RefusedNotKept(n int) { c.NotKeptMessages.Add(int64(n)) }

// Refused implements Meter.
func (c *Counters) Refused(reason wire.Reason, n int) { add(c, &c.refused, reason, n) }

// Retried implements Meter.
func (c *Counters) Retried(reason RetryReason, n int) { add(c, &c.retried, reason, n) }

// Dropped implements Meter.
func (c *Counters) Dropped(reason RetryReason, n int) { add(c, &c.dropped, reason, n) }

// Flushed implements Meter.
func (c *Counters) Flushed(readings, frameBytes int, took time.Duration) {
	c.Flushes.Add(1)
	c.FlushedReadings.Add(int64(readings))
	c.FlushedBytes.Add(int64(frameBytes))
	c.FlushNanos.Add(int64(took))
}

// RefusedFor is how many readings were refused for a reason.
func (c *Counters) RefusedFor(reason wire.Reason) int64 { return get(c, &c.refused, reason) }

// RetriedFor is how many messages were told to come again for a reason.
func (c *Counters) RetriedFor(reason RetryReason) int64 { return get(c, &c.retried, reason) }

// DroppedFor is how many messages without a reply subject were lost for a reason.
func (c *Counters) DroppedFor(reason RetryReason) int64 { return get(c, &c.dropped, reason) }

func add[K comparable](c *Counters, m *map[K]int64, key K, n int) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if *m == nil {
		*m = make(map[K]int64)
	}
	(*m)[key] += int64(n)
}

func get[K comparable](c *Counters, m *map[K]int64, key K) int64 {
	c.mu.Lock()
	defer c.mu.Unlock()
	return (*m)[key]
}
