package broker

import (
	"context"
	"errors"
	"fmt"

	"github.com/nats-io/nats.go/jetstream"
)

// ErrHeld and ErrLost are what a lease answers where another owner has it, and where ours has run out.
var (
	ErrHeld = errors.New("broker: lease is held by another owner")
	ErrLost = errors.New("broker: lease was lost: it ran out, or another owner has it")
)

// A Lease says who should be working on something, until StreamSettings.LeaseTTL after its last renewal by the broker's clock. It does
// not fence: that is done by the commit record. It is for one goroutine.
type Lease struct {
	kv         jetstream.KeyValue
	key, owner string
	revision   uint64
	epoch      uint64 // the revision at which it was acquired
}

// Lease gives the lease of a key, such as "partition-07", for an owner; it is not held yet. An owner is the same after a restart, so that
// a worker need not wait for its own lease to run out.
func (b *Broker) Lease(ctx context.Context, key, owner string) (*Lease, error) {
	kv, err := b.JS.KeyValue(ctx, leaseBucket)
	if err != nil {
		return nil, fmt.Errorf("broker: bucket %s: %w", leaseBucket, err)
	}
	return &Lease{kv: kv, key: key, owner: owner}, nil
}

// Acquire takes the lease, or returns ErrHeld.
func (l *Lease) Acquire(ctx context.Context) error {
	revision, err := l.kv.Create(ctx, l.key, []byte(l.owner))
	if errors.Is(err, jetstream.ErrKeyExists) {
		var entry jetstream.KeyValueEntry
		if entry, err = l.kv.Get(ctx, l.key); err == nil {
			if string(entry.Value()) != l.owner {
				return fmt.Errorf("%w: %s by %s", ErrHeld, l.key, entry.Value())
			}
			revision, err = l.kv.Update(ctx, l.key, []byte(l.owner), entry.Revision())
		}
	}
	if err != nil {
		return l.wrap(err)
	}
	l.revision, l.epoch = revision, revision
	return nil
}

// Epoch is a number that is greater each time the lease is acquired, by whomever; 0 while it is not held. It starts anew
// only where the bucket was made anew.
func (l *Lease) Epoch() uint64 {
	if l.revision == 0 {
		return 0
	}
	return l.epoch
}

// Renew holds it for another term, or returns ErrLost.
func (l *Lease) Renew(ctx context.Context) error {
	if l.revision == 0 {
		return fmt.Errorf("%w: %s", ErrLost, l.key)
	}
	revision, err := l.kv.Update(ctx, l.key, []byte(l.owner), l.revision)
	if err != nil {
		return l.wrap(err)
	}
	l.revision = revision
	return nil
}

// Release gives it up, so that another need not wait.
func (l *Lease) Release(ctx context.Context) error {
	if l.revision == 0 {
		return nil
	}
	err := l.kv.Delete(ctx, l.key, jetstream.LastRevision(l.revision))
	l.revision = 0
	if err != nil {
		return l.wrap(err)
	}
	return nil
}

func (l *Lease) wrap(err error) error {
	var api *jetstream.APIError
	wrongRevision := errors.As(err, &api) &&
		(api.ErrorCode == jetstream.JSErrCodeStreamWrongLastSequence || api.ErrorCode == jetstream.JSErrCodeStreamWrongLastSequenceConstant)
	if wrongRevision || errors.Is(err, jetstream.ErrKeyExists) || errors.Is(err, jetstream.ErrKeyNotFound) {
		l.revision = 0
		return fmt.Errorf("%w: %s", ErrLost, l.key)
	}
	return fmt.Errorf("broker: lease %s: %w", l.key, err)
}
