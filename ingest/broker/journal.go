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

// StoredAt is when an entry was stored; false where there is none under this number. With it a position can tell whether a
// number was used twice.
func (j *Journal) StoredAt(ctx context.Context, seq uint64) (time.Time, bool, error) {
	m, err := j.stream.GetMsg(ctx, seq)
	if errors.Is(err, jetstream.ErrMsgNotFound) {
		return time.Time{}, false, nil
	}
	if err != nil {
		return time.Time{}, false, fmt.Errorf("broker: stream %s: entry %d: %w", JournalStream, seq, err)
	}
	return m.Time, true, nil
}

// PurgeBefore drops what lies up to and with upTo and was stored before a time. Entries lie in the order of their storing, so that
// a search by halves finds the last of them.
func (j *Journal) PurgeBefore(ctx context.Context, upTo uint64, before time.Time) error {
	state, err := j.State(ctx)
	if err != nil {
		return err
	}
	low, high := state.FirstSeq, min(upTo, state.LastSeq)+1 // what is below low goes, what is from high on stays
	for low < high {
		middle := low + (high-low)/2
		at, there, err := j.StoredAt(ctx, middle)
		if err != nil {
			return err
		}
		if !there || at.Before(before) {
			low = middle + 1
		} else {
			high = middle
		}
	}
	if low <= state.FirstSeq {
		return nil
	}
	return j.Purge(ctx, low-1)
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
var ErrRemade = errors.New("broker: stream " + JournalStream + " was made anew, or lost its end: its numbers mean other readings now")

const (
	// resetsMax is how often a consumer that the broker has lost is made again before Next says so. Making it cannot be
	// broken off, so it is tried once, and the caller decides.
	resetsMax = 1
	// lookEvery is how long nothing may come before the stream itself is looked at: a consumer of a stream that was made anew
	// with fewer entries waits without a word until their numbers have caught up.
	lookEvery = 5 * time.Second
)

// A Reader gives the entries of some partitions, in the stream's order. It is for one goroutine.
type Reader struct {
	journal  *Journal
	messages jetstream.MessagesContext
	created  time.Time
	next     uint64 // the least sequence that can come
	consumed uint64 // the consumer's own count, by which its silent restarts are seen
	held     *Entry // came behind a gap
	looked   time.Time
}

// Read starts at the sequence from. Where the stream begins later, the first Next returns a *Gap.
func (j *Journal) Read(ctx context.Context, partitions []int, from uint64) (*Reader, error) {
	state, err := j.State(ctx)
	if err != nil {
		return nil, err
	}
	config := jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverByStartSequencePolicy, OptStartSeq: max(from, 1), MaxResetAttempts: resetsMax}
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
	return &Reader{journal: j, messages: messages, created: state.Created, next: max(from, 1), looked: time.Now()}, nil
}

// Next waits for the next entry until ctx ends. After a *Gap or ctx's own error it can be called again; after any other the reader
// is of no more use, and another can be opened at the entry behind the last one given.
func (r *Reader) Next(ctx context.Context) (Entry, error) {
	if e := r.held; e != nil {
		r.held = nil
		return *e, nil
	}
	m, err := r.messages.Next(jetstream.NextContext(ctx))
	if err != nil {
		return Entry{}, r.nothing(ctx, err)
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
	if restarted {
		if err := r.look(ctx, wanted, e.Seq); err != nil {
			var gap *Gap
			if errors.As(err, &gap) {
				r.held = &e
			}
			return Entry{}, err
		}
	}
	r.looked = time.Now()
	return e, nil
}

// nothing is what Next does when nothing came: from time to time it looks at the stream.
func (r *Reader) nothing(ctx context.Context, err error) error {
	if ctx.Err() == nil {
		return fmt.Errorf("broker: stream %s: reader: %w", JournalStream, err)
	}
	if time.Since(r.looked) < lookEvery || errors.Is(ctx.Err(), context.Canceled) {
		return ctx.Err()
	}
	r.looked = time.Now()
	again, cancel := context.WithTimeout(context.WithoutCancel(ctx), connectTimeout)
	defer cancel()
	if err := r.look(again, r.next, r.next); err != nil && !Unreachable(err) {
		return err
	}
	return ctx.Err()
}

// look asks the broker whether the stream is the one that reading began with, and whether the jump from wanted to got
// left something out: a consumer that (re)starts below the stream's first entry begins at that without a word.
func (r *Reader) look(ctx context.Context, wanted, got uint64) error {
	state, err := r.journal.State(ctx)
	if err != nil {
		return err
	}
	if !state.Created.Equal(r.created) || state.LastSeq+1 < got {
		return ErrRemade
	}
	if first := min(state.FirstSeq, got); first > wanted {
		return &Gap{wanted, first - 1}
	}
	return nil
}

// Close ends reading.
func (r *Reader) Close() { r.messages.Stop() }
