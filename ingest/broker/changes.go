package broker

import (
	"context"
	"errors"
	"fmt"
	"strconv"
	"strings"
	"time"

	"github.com/nats-io/nats.go/jetstream"
)

// Changes is the stream CHANGES, seen by those who read it: what people say, a note a message. The position in it is theirs to keep.
type Changes struct{ stream jetstream.Stream }

// A Change is one message of CHANGES.
type Change struct {
	Seq       uint64
	Partition int
	Stored    time.Time
	Payload   []byte // a note as JSON
}

// PublishChange puts a note where the owner of the partition reads it, and returns when it is on disk.
func (b *Broker) PublishChange(ctx context.Context, partition int, payload []byte) error {
	err := retry(ctx, func(ctx context.Context) (bool, error) {
		_, err := b.JS.Publish(ctx, ChangeSubject(partition), payload)
		return Unreachable(err), err
	})
	if Full(err) {
		return fmt.Errorf("broker: stream %s is full: %w", ChangesStream, err)
	}
	if err != nil {
		return fmt.Errorf("broker: stream %s: %w", ChangesStream, err)
	}
	return nil
}

// Changes opens the stream; EnsureStreams has made it.
func (b *Broker) Changes(ctx context.Context) (*Changes, error) {
	stream, err := b.JS.Stream(ctx, ChangesStream)
	if err != nil {
		return nil, fmt.Errorf("broker: stream %s: %w", ChangesStream, err)
	}
	return &Changes{stream}, nil
}

// State asks the broker.
func (c *Changes) State(ctx context.Context) (JournalState, error) {
	info, err := c.stream.Info(ctx)
	if err != nil {
		return JournalState{}, fmt.Errorf("broker: stream %s: %w", ChangesStream, err)
	}
	first := info.State.FirstSeq
	if info.State.Msgs == 0 {
		first = info.State.LastSeq + 1
	}
	return JournalState{info.Created, first, info.State.LastSeq, info.State.Bytes, uint64(max(info.Config.MaxBytes, 0))}, nil
}

// At gives a message; false where there is none under this number.
func (c *Changes) At(ctx context.Context, seq uint64) (Change, bool, error) {
	m, err := c.stream.GetMsg(ctx, seq)
	if errors.Is(err, jetstream.ErrMsgNotFound) {
		return Change{}, false, nil
	}
	if err != nil {
		return Change{}, false, fmt.Errorf("broker: stream %s: message %d: %w", ChangesStream, seq, err)
	}
	out := Change{Seq: seq, Partition: -1, Stored: m.Time, Payload: m.Data}
	if text, ok := strings.CutPrefix(m.Subject, changesPrefix); ok {
		if p, err := strconv.Atoi(text); err == nil && p >= 0 && p < Partitions {
			out.Partition = p
		}
	}
	return out, true, nil
}

// Purge drops what lies up to and with upTo.
func (c *Changes) Purge(ctx context.Context, upTo uint64) error {
	if err := c.stream.Purge(ctx, jetstream.WithPurgeSequence(upTo+1)); err != nil {
		return fmt.Errorf("broker: stream %s: purge up to %d: %w", ChangesStream, upTo, err)
	}
	return nil
}
