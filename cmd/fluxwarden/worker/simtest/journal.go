package simtest

import (
	"context"
	"errors"
	"time"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/ingest/wire"
)

// A message is one entry of the simulated journal.
type message struct {
	seq       uint64
	stamp     int64
	partition int
	groups    []wire.Group
	ids       []int // of the readings in it
	synced    bool
}

// A journal behaves as the broker's stream does, and as it may: it can lose what was not synced and give its numbers
// again, lose what was, be trimmed, and be made anew. Cursors break when that happens.
type journal struct {
	w          *world
	created    int64
	last       uint64
	messages   []message
	generation int // of cursors; those of an earlier one are broken
}

var errCursorBroken = errors.New("simulated: connection to the broker was lost")

func (j *journal) first() uint64 {
	if len(j.messages) > 0 {
		return j.messages[0].seq
	}
	return j.last + 1
}

func (j *journal) append(partition int, groups []wire.Group, ids []int) {
	j.last++
	j.messages = append(j.messages, message{seq: j.last, stamp: j.w.stamp(), partition: partition, groups: groups, ids: ids})
}

// sync makes all that was appended durable and returns the readings that are acknowledged by it.
func (j *journal) sync() []int {
	var acked []int
	for i := range j.messages {
		if m := &j.messages[i]; !m.synced {
			m.synced = true
			acked = append(acked, m.ids...)
		}
	}
	return acked
}

// unacked lists the readings that powerLoss would drop.
func (j *journal) unacked() []int {
	var ids []int
	for i := range j.messages {
		if m := &j.messages[i]; !m.synced {
			ids = append(ids, m.ids...)
		}
	}
	return ids
}

// powerLoss drops what was not synced. Its numbers are given again.
func (j *journal) powerLoss() {
	for len(j.messages) > 0 && !j.messages[len(j.messages)-1].synced {
		j.messages = j.messages[:len(j.messages)-1]
		j.last--
	}
	j.generation++
}

// loseTail drops acknowledged messages from the end, as brokers have been seen to do, and returns them.
func (j *journal) loseTail(n int) []message {
	j.powerLoss()
	n = min(n, len(j.messages))
	lost := j.messages[len(j.messages)-n:]
	j.messages = j.messages[:len(j.messages)-n]
	j.last -= uint64(n)
	return lost
}

// trim drops messages from the beginning, whether committed or not, and returns them.
func (j *journal) trim(n int) []message {
	n = min(n, len(j.messages))
	lost := j.messages[:n]
	j.messages = j.messages[n:]
	return lost
}

// remake deletes the stream and makes it anew: its numbers start again.
func (j *journal) remake() []message {
	j.powerLoss()
	lost := j.messages
	j.messages, j.last, j.created = nil, 0, j.w.stamp()
	j.generation++
	return lost
}

func (j *journal) State(context.Context) (worker.StreamState, error) {
	return worker.StreamState{Stream: "JOURNAL", Created: j.created, First: j.first(), Last: j.last}, nil
}

func (j *journal) StampOf(_ context.Context, seq uint64) (int64, bool, error) {
	if m := j.at(seq); m != nil {
		return m.stamp, true, nil
	}
	return 0, false, nil
}

func (j *journal) at(seq uint64) *message {
	if first := j.first(); len(j.messages) > 0 && seq >= first && seq <= j.last {
		return &j.messages[seq-first]
	}
	return nil
}

func (j *journal) Open(_ context.Context, partitions []int, from uint64) (worker.Cursor, error) {
	c := &cursor{j: j, next: from, generation: j.generation, partitions: map[int]bool{}}
	for _, p := range partitions {
		c.partitions[p] = true
	}
	return c, nil
}

func (j *journal) Purge(_ context.Context, seq uint64, before time.Time) error {
	for len(j.messages) > 0 && j.messages[0].seq <= seq && j.messages[0].stamp < before.UnixNano() && j.messages[0].synced {
		j.w.purged++
		j.messages = j.messages[1:]
	}
	return nil
}

type cursor struct {
	j          *journal
	next       uint64
	generation int
	partitions map[int]bool
}

func (c *cursor) Next(context.Context, time.Duration) (worker.Delivery, bool, error) {
	if c.generation != c.j.generation {
		return worker.Delivery{}, false, errCursorBroken
	}
	for c.next = max(c.next, c.j.first()); c.next <= c.j.last; {
		m := c.j.at(c.next)
		c.next++
		if c.partitions[m.partition] {
			return worker.Delivery{Seq: m.seq, Stamp: m.stamp, Partition: m.partition, Groups: m.groups}, true, nil
		}
	}
	return worker.Delivery{}, false, nil
}

func (c *cursor) Pending() uint64 {
	n := uint64(0)
	for i := len(c.j.messages) - 1; i >= 0 && c.j.messages[i].seq >= c.next; i-- {
		if c.partitions[c.j.messages[i].partition] {
			n++
		}
	}
	return n
}

func (c *cursor) Close() {}
