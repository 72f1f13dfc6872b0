package broker

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"time"

	"github.com/nats-io/nats.go/jetstream"
)

// A Journal is the stream JOURNAL, seen by those who read it. The position in it is theirs to keep.
type Journal struct {
	js     jetstream.JetStream
	stream jetstream.Stream
}

// JournalState is what a position must be held against. A stream made anew has another Created; its numbers start again
// and mean other readings. After a power cut, numbers may be used twice even under the same Created.
type JournalState struct {
	Created           time.Time
	FirstSeq, LastSeq uint64 // of an empty stream, FirstSeq is LastSeq+1
	Bytes, BytesMax   uint64
}

// Journal opens the stream; EnsureStreams has made it.
func (b *Broker) Journal(ctx context.Context) (*Journal, error) {
	j := &Journal{js: b.JS}
	err := retry(ctx, func(ctx context.Context) (again bool, err error) {
		j.stream, err = b.JS.Stream(ctx, JournalStream)
		return Unreachable(err), err
	})
	if err != nil {
		return nil, fmt.Errorf("broker: stream %s: %w", JournalStream, err)
	}
	return j, nil
}

// State asks the broker.
func (j *Journal) State(ctx context.Context) (JournalState, error) {
	info, err := j.stream.Info(ctx)
	if err != nil {
		return JournalState{}, fmt.Errorf("broker: stream %s: %w", JournalStream, err)
	}
	first := info.State.FirstSeq
	if info.State.Msgs == 0 { // a stream that never held anything says 0
		first = info.State.LastSeq + 1
	}
	return JournalState{info.Created, first, info.State.LastSeq, info.State.Bytes, uint64(max(info.Config.MaxBytes, 0))}, nil
}

// Purge drops what lies up to and with upTo, of all partitions.
func (j *Journal) Purge(ctx context.Context, upTo uint64) error {
	if err := j.stream.Purge(ctx, jetstream.WithPurgeSequence(upTo+1)); err != nil {
		return fmt.Errorf("broker: stream %s: purge up to %d: %w", JournalStream, upTo, err)
	}
	return nil
}

// An Entry is one message of the journal.
type Entry struct {
	Seq       uint64
	Partition int
	Stored    time.Time
	Payload   []byte // a frame of wire.AppendJournal
	Pending   uint64 // entries of the partitions read that are behind this one; 0 at the end
}

// A Gap says that entries which were asked for are not there any more. It is an error that ends nothing: reading goes on behind
// it. The broker itself is silent about it.
type Gap struct{ From, To uint64 } // both lost, of whatever partition

func (g *Gap) Error() string {
	return fmt.Sprintf("broker: stream %s: entries %d to %d are gone: they were purged, or the stream was made anew", JournalStream, g.From, g.To)
}

// ErrRemade is returned where the stream is not the one that reading began with.
var ErrRemade = errors.New("broker: stream " + JournalStream + " was made anew: its numbers mean other readings now")

// A Reader gives the entries of some partitions, in the stream's order. It is for one goroutine.
type Reader struct {
	journal  *Journal
	messages jetstream.MessagesContext
	created  time.Time
	next     uint64 // the least sequence that can come
	consumed uint64 // the consumer's own count, by which its silent restarts are seen
	held     *Entry // came behind a gap
}

// Read starts at the sequence from. Where the stream begins later, the first Next returns a *Gap.
func (j *Journal) Read(ctx context.Context, partitions []int, from uint64) (*Reader, error) {
	state, err := j.State(ctx)
	if err != nil {
		return nil, err
	}
	config := jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverByStartSequencePolicy, OptStartSeq: max(from, 1), MaxResetAttempts: -1}
	if sorted := slices.Compact(slices.Sorted(slices.Values(partitions))); len(sorted) < Partitions {
		for _, p := range sorted {
			config.FilterSubjects = append(config.FilterSubjects, JournalSubject(p))
		}
		if len(sorted) == 0 {
			return nil, errors.New("broker: journal: no partitions to read")
		}
	}
	consumer, err := j.js.OrderedConsumer(ctx, JournalStream, config)
	if err != nil {
		return nil, fmt.Errorf("broker: stream %s: reader: %w", JournalStream, err)
	}
	messages, err := consumer.Messages(jetstream.PullMaxBytes(4 * MessageBytesMax))
	if err != nil {
		return nil, fmt.Errorf("broker: stream %s: reader: %w", JournalStream, err)
	}
	return &Reader{journal: j, messages: messages, created: state.Created, next: max(from, 1)}, nil
}

// Next waits for the next entry until ctx ends. After a *Gap or an error of ctx it can be called again.
func (r *Reader) Next(ctx context.Context) (Entry, error) {
	if e := r.held; e != nil {
		r.held = nil
		return *e, nil
	}
	m, err := r.messages.Next(jetstream.NextContext(ctx))
	if err != nil {
		return Entry{}, err
	}
	meta, err := m.Metadata()
	if err != nil {
		return Entry{}, fmt.Errorf("broker: stream %s: %w", JournalStream, err)
	}
	partition, ok := partitionOfSubject(m.Subject())
	if !ok {
		return Entry{}, fmt.Errorf("broker: stream %s: entry %d has the subject %s: it is of no partition", JournalStream, meta.Sequence.Stream, m.Subject())
	}
	e := Entry{meta.Sequence.Stream, partition, meta.Timestamp, m.Data(), meta.NumPending}
	wanted := r.next
	restarted := meta.Sequence.Consumer != r.consumed+1 || r.consumed == 0
	r.next, r.consumed = e.Seq+1, meta.Sequence.Consumer
	if restarted && e.Seq > wanted {
		r.held = &e
		if err := r.look(ctx, wanted, e.Seq); err != nil {
			return Entry{}, err
		}
		r.held = nil
	}
	return e, nil
}

// look asks the broker whether the jump from wanted to got left something out: a consumer that (re)starts below the
// stream's first entry begins at that without a word.
func (r *Reader) look(ctx context.Context, wanted, got uint64) error {
	state, err := r.journal.State(ctx)
	if err != nil {
		return err
	}
	if !state.Created.Equal(r.created) {
		return ErrRemade
	}
	if first := min(state.FirstSeq, got); first > wanted {
		return &Gap{wanted, first - 1}
	}
	return nil
}

// Close ends reading.
func (r *Reader) Close() { r.messages.Stop() }
