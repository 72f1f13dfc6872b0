package broker

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
)

// The streams' names.
const (
	JournalStream  = "JOURNAL"
	RefusedStream  = "REFUSED"
	ChangesStream  = "CHANGES"
	FindingsStream = "FINDINGS"
	leaseBucket    = "LEASES"

	changesPrefix  = "changes."
	findingsPrefix = "findings."
)

// StreamSettings bound the streams. All are files.
type StreamSettings struct {
	JournalBytes  int64 // full: new readings are refused, old ones stay
	RefusedBytes  int64 // full: the oldest go
	ChangesBytes  int64 // full: new ones are refused
	FindingsBytes int64 // full: the oldest go
	Replicas      int   // 1, or 3 in a cluster
	LeaseTTL      time.Duration
}

// DefaultStreams are bounds for a few stations on a small machine.
func DefaultStreams() StreamSettings {
	return StreamSettings{JournalBytes: 2 << 30, RefusedBytes: 256 << 20, ChangesBytes: 64 << 20, FindingsBytes: 256 << 20, Replicas: 1,
		LeaseTTL: 15 * time.Second}
}

// Bytes is what the streams may take together, with room for their books: the least for EmbeddedSettings.StoreBytes.
func (s StreamSettings) Bytes() int64 {
	return s.JournalBytes + s.RefusedBytes + s.ChangesBytes + s.FindingsBytes + leaseBytes
}

const leaseBytes = 16 << 20

// EnsureStreams makes the streams that are not there, gives those that are the bounds asked for, and refuses one that is
// something else. Where the broker does not answer it goes on trying until ctx ends.
func (b *Broker) EnsureStreams(ctx context.Context, s StreamSettings) error {
	file := func(name, subject string, bytes int64, discard jetstream.DiscardPolicy) jetstream.StreamConfig {
		return jetstream.StreamConfig{Name: name, Subjects: []string{subject}, Storage: jetstream.FileStorage, Retention: jetstream.LimitsPolicy,
			Discard: discard, MaxBytes: bytes, MaxMsgSize: MessageBytesMax, Replicas: max(s.Replicas, 1), AllowDirect: true}
	}
	for _, want := range []jetstream.StreamConfig{
		file(JournalStream, journalPrefix+"*", s.JournalBytes, jetstream.DiscardNew),
		file(RefusedStream, "refused.*", s.RefusedBytes, jetstream.DiscardOld),
		file(ChangesStream, changesPrefix+">", s.ChangesBytes, jetstream.DiscardNew),
		file(FindingsStream, findingsPrefix+">", s.FindingsBytes, jetstream.DiscardOld),
	} {
		err := retry(ctx, func(ctx context.Context) (bool, error) { return b.ensureStream(ctx, want) })
		var api *jetstream.APIError
		if errors.As(err, &api) && api.ErrorCode == errCodeNoStorage {
			return fmt.Errorf("broker: stream %s: %d bytes are more than the broker's store has left: make the store larger or the stream smaller: %w",
				want.Name, want.MaxBytes, err)
		}
		if err != nil {
			return fmt.Errorf("broker: stream %s: %w", want.Name, err)
		}
	}
	err := retry(ctx, func(ctx context.Context) (bool, error) {
		_, err := b.JS.CreateOrUpdateKeyValue(ctx, jetstream.KeyValueConfig{Bucket: leaseBucket, TTL: s.LeaseTTL, Storage: jetstream.FileStorage,
			Replicas: max(s.Replicas, 1), MaxBytes: leaseBytes})
		return Unreachable(err), err
	})
	if err != nil {
		return fmt.Errorf("broker: bucket %s: %w", leaseBucket, err)
	}
	return nil
}

func (b *Broker) ensureStream(ctx context.Context, want jetstream.StreamConfig) (again bool, err error) {
	stream, err := b.JS.Stream(ctx, want.Name)
	if errors.Is(err, jetstream.ErrStreamNotFound) {
		_, err = b.JS.CreateStream(ctx, want)
		return Unreachable(err), err
	}
	if err != nil {
		return Unreachable(err), err
	}
	have := stream.CachedInfo().Config
	switch {
	case !slices.Equal(have.Subjects, want.Subjects):
		return false, fmt.Errorf("it is there with subjects %v, not %v: it belongs to something else", have.Subjects, want.Subjects)
	case have.Storage != want.Storage:
		return false, errors.New("it is there but in memory: its readings would not outlive the broker; delete it")
	case have.Retention != want.Retention || have.Discard != want.Discard:
		return false, errors.New("it is there but drops data by other rules: delete it, or give it another name there")
	}
	if have.MaxBytes == want.MaxBytes && have.Replicas == want.Replicas && have.MaxMsgSize == want.MaxMsgSize {
		return false, nil
	}
	have.MaxBytes, have.Replicas, have.MaxMsgSize = want.MaxBytes, want.Replicas, want.MaxMsgSize
	_, err = b.JS.UpdateStream(ctx, have)
	return Unreachable(err), err
}

// Unreachable says whether an error is of a kind that goes away when the broker comes back, so that waiting helps.
func Unreachable(err error) bool {
	for _, e := range []error{context.DeadlineExceeded, nats.ErrTimeout, nats.ErrNoResponders, nats.ErrDisconnected, nats.ErrConnectionReconnecting,
		nats.ErrReconnectBufExceeded, nats.ErrNoServers, nats.ErrStaleConnection, jetstream.ErrNoStreamResponse} {
		if errors.Is(err, e) {
			return true
		}
	}
	var api *jetstream.APIError
	return errors.As(err, &api) && api.Code == 503
}

// errCodeStoreFailed is how the server answers a publish that its bounds leave no room for, among other failures to store.
const (
	errCodeStoreFailed           = 10077
	errCodeInsufficientResources = 10023
	errCodeNoStorage             = 10047 // for a new stream's bound
)

// Full says whether a publish was refused for want of room in the stream.
func Full(err error) bool {
	var api *jetstream.APIError
	if !errors.As(err, &api) {
		return false
	}
	return api.ErrorCode == errCodeStoreFailed || api.ErrorCode == errCodeInsufficientResources
}
