package daemon

import (
	"context"
	"errors"
	"log/slog"
	"sync/atomic"
	"time"

	"fluxwarden/ingest/broker"
)

// A sole lease is that of a worker with a broker of its own: all partitions, always.
type soleLease struct{ epoch uint64 }

// Owned implements worker.Lease.
func (l soleLease) Owned(context.Context, time.Time) (map[int]uint64, error) {
	return all(l.epoch), nil
}

func all(epoch uint64) map[int]uint64 {
	owned := make(map[int]uint64, broker.Partitions)
	for p := range broker.Partitions {
		owned[p] = epoch
	}
	return owned
}

// A brokerLease is one lease in an external broker for all partitions of an archive. It is renewed beside the worker, which
// goes on with what it has when the broker is away: the archive decides.
type brokerLease struct {
	held  atomic.Bool
	epoch uint64
}

const leaseKey = "archive"

// Owned implements worker.Lease.
func (l *brokerLease) Owned(context.Context, time.Time) (map[int]uint64, error) {
	if !l.held.Load() {
		return nil, nil
	}
	return all(l.epoch), nil
}

// keep takes and renews the lease until the context ends, and then gives it up.
func (l *brokerLease) keep(ctx context.Context, b *broker.Broker, owner string, ttl time.Duration, log *slog.Logger, failed func(string)) {
	ask := func(f func(context.Context) error) error {
		once, cancel := context.WithTimeout(ctx, askWait)
		defer cancel()
		return f(once)
	}
	var lease *broker.Lease
	said := ""
	for {
		var err error
		if lease == nil {
			err = ask(func(ctx context.Context) (err error) { lease, err = b.Lease(ctx, leaseKey, owner); return err })
		}
		if err == nil && l.held.Load() {
			err = ask(lease.Renew)
		} else if err == nil {
			err = ask(lease.Acquire)
		}
		switch {
		case err == nil:
			l.held.Store(true)
			said = ""
		case errors.Is(err, broker.ErrHeld) || errors.Is(err, broker.ErrLost):
			l.held.Store(false)
			fallthrough
		default:
			failed("lease")
			if said != err.Error() && ctx.Err() == nil {
				said = err.Error()
				log.Warn("the lease on the partitions is not renewed", "cause", err)
			}
		}
		timer := time.NewTimer(ttl / 3)
		select {
		case <-ctx.Done():
			timer.Stop()
			if lease != nil && l.held.Load() {
				once, cancel := context.WithTimeout(context.WithoutCancel(ctx), time.Second)
				_ = lease.Release(once) // otherwise it runs out
				cancel()
			}
			return
		case <-timer.C:
		}
	}
}
