package daemon

import (
	"context"
	"encoding/json"
	"fmt"
	"sync"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/ingest/broker"
)

// changes is the broker's stream of notes as the worker sees it.
type changes struct {
	b      *broker.Broker
	mu     sync.Mutex
	opened *broker.Changes
}

// changesAtOnce is how many notes are read in one go.
const changesAtOnce = 64

func (c *changes) open(ctx context.Context) (*broker.Changes, error) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.opened == nil {
		o, err := c.b.Changes(ctx)
		if err != nil {
			return nil, err
		}
		c.opened = o
	}
	return c.opened, nil
}

// State implements worker.Changes.
func (c *changes) State(ctx context.Context) (worker.StreamState, error) {
	ctx, cancel := context.WithTimeout(ctx, askWait)
	defer cancel()
	o, err := c.open(ctx)
	if err != nil {
		return worker.StreamState{}, err
	}
	st, err := o.State(ctx)
	if err != nil {
		return worker.StreamState{}, err
	}
	return worker.StreamState{Stream: broker.ChangesStream, Created: st.Created.UnixNano(), First: st.FirstSeq, Last: st.LastSeq, Bytes: st.Bytes}, nil
}

// StampOf implements worker.Changes.
func (c *changes) StampOf(ctx context.Context, seq uint64) (int64, bool, error) {
	ctx, cancel := context.WithTimeout(ctx, askWait)
	defer cancel()
	o, err := c.open(ctx)
	if err != nil {
		return 0, false, err
	}
	x, ok, err := o.At(ctx, seq)
	return x.Stored.UnixNano(), ok, err
}

// Read implements worker.Changes.
func (c *changes) Read(ctx context.Context, from uint64) ([]worker.Change, error) {
	ctx, cancel := context.WithTimeout(ctx, askWait)
	defer cancel()
	o, err := c.open(ctx)
	if err != nil {
		return nil, err
	}
	st, err := o.State(ctx)
	if err != nil {
		return nil, err
	}
	var list []worker.Change
	for seq := max(from, st.FirstSeq); seq <= st.LastSeq && len(list) < changesAtOnce; seq++ {
		x, ok, err := o.At(ctx, seq)
		if err != nil {
			return nil, err
		}
		if !ok {
			continue
		}
		change := worker.Change{Seq: x.Seq, Stamp: x.Stored.UnixNano(), Partition: x.Partition, Payload: x.Payload}
		if change.Bad = json.Unmarshal(x.Payload, &change.Note); change.Bad == nil && x.Partition != broker.PartitionOf(change.Note.Station) {
			change.Bad = fmt.Errorf("note of %s came for partition %d; it is in %d", change.Note.Station, x.Partition, broker.PartitionOf(change.Note.Station))
		}
		list = append(list, change)
	}
	return list, nil
}

// Purge implements worker.Changes.
func (c *changes) Purge(ctx context.Context, seq uint64) error {
	ctx, cancel := context.WithTimeout(ctx, askWait)
	defer cancel()
	o, err := c.open(ctx)
	if err != nil {
		return err
	}
	return o.Purge(ctx, seq)
}
