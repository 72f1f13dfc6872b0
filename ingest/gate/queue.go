package gate

import (
	"sync"
	"time"

	"fluxwarden/qc/minute"
)

// A request is one payload on its way to the disk.
type request struct {
	station  *station
	name     string // of the station, also where it is not known
	payload  []byte
	received minute.Stamp
	answer   func(Reply) // nil where the sender wants none
}

// A station is what the gate keeps of one that may speak. The queue's lock guards what waits; the buckets belong to the
// goroutine that flushes.
type station struct {
	partition int // -1 for strangers
	waiting   []request
	bytes     int
	rate      bucket
	keep      bucket // of refused payloads
}

// A queue holds what waits, station by station, and deals it out in turn, so that one station's flood is that station's own
// wait.
type queue struct {
	mu       sync.Mutex
	s        *Settings
	ring     []*station // those with something waiting, in the order of their turns
	bytes    int
	messages int
	closed   bool
	some     chan struct{} // something waits, or the queue was closed
	plenty   chan struct{} // enough waits for a flush, or the queue was closed
}

func newQueue(s *Settings) *queue {
	return &queue{s: s, some: make(chan struct{}, 1), plenty: make(chan struct{}, 1)}
}

// add lets a request in, or says why not. When all together wait too much, a station that has nothing waiting is still let in
// up to twice that: those who flood are turned away first.
func (q *queue) add(r request) (refusal RetryReason, ok bool) {
	q.mu.Lock()
	defer q.mu.Unlock()
	st, n := r.station, len(r.payload)
	switch {
	case q.closed:
		return ShuttingDown, false
	case len(st.waiting) >= q.s.StationMessagesMax || (st.bytes+n > q.s.StationBytesMax && st.bytes > 0):
		return Busy, false
	case q.bytes+n > 2*q.s.PendingBytesMax || (q.bytes+n > q.s.PendingBytesMax && len(st.waiting) > 0):
		return Busy, false
	}
	if len(st.waiting) == 0 {
		q.ring = append(q.ring, st)
	}
	st.waiting = append(st.waiting, r)
	st.bytes += n
	q.bytes += n
	q.messages++
	signal(q.some)
	if q.enough() {
		signal(q.plenty)
	}
	return "", true
}

func (q *queue) enough() bool { return q.messages >= q.s.FlushMessages || q.bytes >= q.s.FlushBytes }

func signal(c chan struct{}) {
	select {
	case c <- struct{}{}:
	default:
	}
}

// wait returns when there is something to flush, after it has had time to become more; false when the queue is closed
// and empty.
func (q *queue) wait() bool {
	for {
		q.mu.Lock()
		some, enough, closed := q.messages > 0, q.enough(), q.closed
		q.mu.Unlock()
		if closed {
			return some
		}
		if !some {
			<-q.some
			continue
		}
		if enough {
			return true
		}
		timer := time.NewTimer(q.s.Linger)
		select {
		case <-timer.C:
			return true
		case <-q.plenty: // it may be left over from before: look again
			timer.Stop()
		}
	}
}

// take deals out the next flush: one request a station in turn, until there is enough.
func (q *queue) take(into []request) []request {
	q.mu.Lock()
	defer q.mu.Unlock()
	bytes := 0
	for len(q.ring) > 0 && len(into) < q.s.FlushMessages && bytes < q.s.FlushBytes {
		st := q.ring[0]
		q.ring = q.ring[1:]
		r := st.waiting[0]
		st.waiting[0] = request{}
		st.waiting = st.waiting[1:]
		n := len(r.payload)
		st.bytes -= n
		q.bytes -= n
		q.messages--
		bytes += n
		into = append(into, r)
		if len(st.waiting) > 0 {
			q.ring = append(q.ring, st)
		}
	}
	return into
}

func (q *queue) close() {
	q.mu.Lock()
	defer q.mu.Unlock()
	q.closed = true
	signal(q.some)
	signal(q.plenty)
}

// A bucket lets a payload through, however many readings it has, while there is at least one token; what passes may leave
// it in debt. It fills with time.
type bucket struct {
	tokens float64
	last   time.Time
}

// open says whether something may pass now.
func (b *bucket) open(now time.Time, perSecond, burst float64) bool {
	if b.last.IsZero() {
		b.tokens = burst
	} else if d := now.Sub(b.last).Seconds(); d > 0 {
		b.tokens = min(burst, b.tokens+d*perSecond)
	}
	b.last = now
	return b.tokens >= 1
}

// spend books what has passed.
func (b *bucket) spend(n int) { b.tokens -= float64(n) }
