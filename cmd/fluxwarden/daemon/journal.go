package daemon

import (
	"context"
	"errors"
	"sync"
	"time"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/wire"
)

// askWait bounds one question to the broker, so that a worker is never stuck in one.
const askWait = 5 * time.Second

// journal is the broker's journal as the worker sees it.
type journal struct {
	b      *broker.Broker
	mu     sync.Mutex
	opened *broker.Journal
	onFull func(bytes, limit uint64)
	hold   func(ctx context.Context) (upTo uint64, err error) // on an edge: what the hub has; nil elsewhere
}

func (j *journal) open(ctx context.Context) (*broker.Journal, error) {
	j.mu.Lock()
	defer j.mu.Unlock()
	if j.opened == nil {
		o, err := j.b.Journal(ctx)
		if err != nil {
			return nil, err
		}
		j.opened = o
	}
	return j.opened, nil
}

// State implements worker.Journal.
func (j *journal) State(ctx context.Context) (worker.StreamState, error) {
	ctx, cancel := context.WithTimeout(ctx, askWait)
	defer cancel()
	o, err := j.open(ctx)
	if err != nil {
		return worker.StreamState{}, err
	}
	st, err := o.State(ctx)
	if err != nil {
		return worker.StreamState{}, err
	}
	if j.onFull != nil {
		j.onFull(st.Bytes, st.BytesMax)
	}
	return worker.StreamState{Stream: broker.JournalStream, Created: st.Created.UnixNano(), First: st.FirstSeq, Last: st.LastSeq, Bytes: st.Bytes}, nil
}

// StampOf implements worker.Journal.
func (j *journal) StampOf(ctx context.Context, seq uint64) (int64, bool, error) {
	ctx, cancel := context.WithTimeout(ctx, askWait)
	defer cancel()
	o, err := j.open(ctx)
	if err != nil {
		return 0, false, err
	}
	at, ok, err := o.StoredAt(ctx, seq)
	if err != nil || !ok {
		return 0, false, err
	}
	return at.UnixNano(), true, nil
}

// Purge implements worker.Journal.
func (j *journal) Purge(ctx context.Context, seq uint64, before time.Time) error {
	ctx, cancel := context.WithTimeout(ctx, askWait)
	defer cancel()
	o, err := j.open(ctx)
	if err != nil {
		return err
	}
	if j.hold != nil {
		has, err := j.hold(ctx)
		if err != nil {
			return err
		}
		if seq = min(seq, has); seq == 0 {
			return nil
		}
	}
	return o.PurgeBefore(ctx, seq, before)
}

// Open implements worker.Journal.
func (j *journal) Open(ctx context.Context, partitions []int, from uint64) (worker.Cursor, error) {
	o, err := j.open(ctx)
	if err != nil {
		return nil, err
	}
	ask, cancel := context.WithTimeout(ctx, askWait)
	defer cancel()
	st, err := o.State(ask)
	if err != nil {
		return nil, err
	}
	r, err := o.Read(ask, partitions, from)
	if err != nil {
		return nil, err
	}
	c := &cursor{r: r}
	if st.LastSeq >= from {
		c.pending = st.LastSeq - from + 1 // at most; the first message says exactly
	}
	return c, nil
}

type cursor struct {
	r       *broker.Reader
	pending uint64
}

// Next implements worker.Cursor. A gap ends the cursor: the worker opens another, and sees by the stream's state what is gone.
func (c *cursor) Next(ctx context.Context, wait time.Duration) (worker.Delivery, bool, error) {
	waiting, cancel := context.WithTimeout(ctx, wait)
	defer cancel()
	e, err := c.r.Next(waiting)
	if err != nil {
		if waiting.Err() != nil && (errors.Is(err, context.DeadlineExceeded) || errors.Is(err, context.Canceled)) {
			c.pending = 0
			return worker.Delivery{}, false, nil
		}
		return worker.Delivery{}, false, err
	}
	c.pending = e.Pending
	d := worker.Delivery{Seq: e.Seq, Stamp: e.Stored.UnixNano(), Partition: e.Partition}
	if d.Groups, d.Bad = wire.DecodeJournal(e.Payload); d.Bad != nil {
		d.Payload = e.Payload
	}
	return d, true, nil
}

// Pending implements worker.Cursor.
func (c *cursor) Pending() uint64 { return c.pending }

// Close implements worker.Cursor.
func (c *cursor) Close() { c.r.Close() }
