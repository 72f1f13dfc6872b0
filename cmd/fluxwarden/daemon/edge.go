package daemon

import (
	"context"
	"maps"
	"slices"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/wire"
)

// leafSettings say whether the broker is an edge or a hub.
func (d *Daemon) leafSettings(l *broker.LeafSettings) error {
	s := &d.config.Settings
	if s.Edge.Hub != "" {
		secret, err := broker.ReadSecret(s.Edge.Credentials)
		if err != nil {
			return err
		}
		l.Hub, l.Secret, l.CA = s.Edge.Hub, secret, s.Edge.CA
	}
	if !off(s.Hub.Listen) {
		var err error
		if l.Host, l.Port, err = splitAddress(s.Hub.Listen); err != nil {
			return err
		}
	}
	return nil
}

// holdForHub keeps an edge's journal until its hub has it; nil where the daemon is no edge.
func (d *Daemon) holdForHub() func(context.Context) (uint64, error) {
	if d.config.Settings.Edge.Hub == "" {
		return nil
	}
	return func(ctx context.Context) (uint64, error) {
		st, err := d.broker.ForHub(ctx)
		return st.Forwarded, err
	}
}

const (
	edgeEvery     = 5 * time.Second
	edgeAlarm     = 0.7 // of the journal's bound, while the hub has not got all
	fetchEntries  = 200
	fetchPause    = time.Second
	fetchPauseMax = 15 * time.Second
	liveWithin    = time.Minute // entries that are no older are live and are not held back
)

func (d *Daemon) startEdgeOrHub(ctx context.Context) {
	if d.config.Settings.Edge.Hub != "" {
		d.done.Go(func() { d.watchEdge(ctx) })
	}
	if !off(d.config.Settings.Hub.Listen) {
		d.done.Go(func() { d.readEdges(ctx) })
	}
}

// watchEdge makes the consumer that the hub reads by, shows what it has not got, and says so before the journal is full.
func (d *Daemon) watchEdge(ctx context.Context) {
	ticker := time.NewTicker(edgeEvery)
	defer ticker.Stop()
	alarmed := false
	for {
		ask, cancel := context.WithTimeout(ctx, askWait)
		st, err := d.broker.ForHub(ask)
		var bytes, limit uint64
		if err == nil {
			if j, e := d.broker.Journal(ask); e == nil {
				if state, e := j.State(ask); e == nil {
					bytes, limit = state.Bytes, state.BytesMax
				}
			}
		}
		cancel()
		if err == nil && limit > 0 {
			share := float64(bytes) / float64(limit)
			if st.Unsent == 0 {
				share = 0
			}
			d.ways.metrics.Edge(d.embedded.Joined(), st.Unsent, share)
			if alarm := share >= edgeAlarm; alarm != alarmed {
				if alarmed = alarm; alarm {
					d.log.Error("the journal fills with what the hub has not got; when it is full, readings are refused and loggers must keep them",
						"bytes", bytes, "limit", limit, "unsent_entries", st.Unsent)
				} else {
					d.log.Info("the journal has room again")
				}
			}
		}
		select {
		case <-ctx.Done():
			return
		case <-ticker.C:
		}
	}
}

// readEdges reads the journals of all edges that have a credential, each at its own pace.
func (d *Daemon) readEdges(ctx context.Context) {
	edges, err := broker.ConnectEdges(d.embedded)
	if err != nil {
		d.metrics.Failed("edge")
		d.log.Error("edges cannot be read", "cause", err)
		return
	}
	defer edges.Close()
	running := map[string]context.CancelFunc{}
	defer func() {
		for _, stop := range running {
			stop()
		}
	}()
	ticker := time.NewTicker(edgeEvery)
	defer ticker.Stop()
	for {
		names := d.access.Edges()
		for _, name := range names {
			if running[name] == nil {
				one, stop := context.WithCancel(ctx)
				running[name] = stop
				d.done.Go(func() { d.readEdge(one, edges, name) })
			}
		}
		for _, name := range slices.Collect(maps.Keys(running)) {
			if !slices.Contains(names, name) {
				running[name]()
				delete(running, name)
			}
		}
		select {
		case <-ctx.Done():
			return
		case <-ticker.C:
		}
	}
}

// readEdge takes what one edge has, puts it on this disk, and only then acknowledges it.
func (d *Daemon) readEdge(ctx context.Context, edges *broker.Broker, name string) {
	pause, away := fetchPause, false
	for ctx.Err() == nil {
		entries, err := broker.FetchEdge(ctx, edges, name, fetchEntries)
		if len(entries) > 0 {
			var readings int
			if readings, err = d.takeFromEdge(ctx, entries); err == nil {
				d.ways.metrics.FromEdge(name, len(entries), time.Since(entries[len(entries)-1].Stored))
				d.holdBack(ctx, entries, readings)
			}
		}
		if err == nil {
			if away {
				d.log.Info("the edge is there again", "edge", name)
			}
			pause, away = fetchPause, false
			continue
		}
		if ctx.Err() != nil {
			return
		}
		d.metrics.Failed("edge")
		if !away {
			away = true
			d.log.Warn("an edge cannot be read; it is tried again for ever, and keeps what it has", "edge", name, "cause", err)
		}
		select {
		case <-ctx.Done():
		case <-time.After(pause):
		}
		pause = min(2*pause, fetchPauseMax)
	}
}

// takeFromEdge journals entries of an edge. Stations that the site file does not know are left out and go to REFUSED.
func (d *Daemon) takeFromEdge(ctx context.Context, entries []broker.EdgeEntry) (readings int, err error) {
	known := d.known()
	for i := range entries {
		groups, bad := wire.DecodeJournal(entries[i].Payload)
		if bad != nil {
			continue // the worker sets it aside with its reason, as any entry that cannot be read
		}
		kept := groups[:0]
		for _, g := range groups {
			readings += len(g.Readings)
			if known(g.Station) && broker.PartitionOf(g.Station) == entries[i].Partition {
				kept = append(kept, g)
				continue
			}
			err := d.refuse(ctx, g.Station, wire.UnknownStation, "it came from an edge and is not in the hub's site file", len(g.Readings), wire.EncodeJSON(nil, g.Readings))
			if err != nil {
				return readings, err
			}
		}
		switch {
		case len(kept) == 0:
			entries[i].Payload = nil
		case len(kept) < len(groups):
			entries[i].Payload = wire.AppendJournal(nil, kept)
		}
	}
	if err := d.broker.AppendJournal(ctx, entries); err != nil {
		return readings, err
	}
	for i := range entries {
		if err := entries[i].Ack(); err != nil {
			return readings, err // it comes again, and is dropped as a repeat
		}
	}
	return readings, nil
}

// holdBack waits after entries that are old, so that catching up takes no more than its share.
func (d *Daemon) holdBack(ctx context.Context, entries []broker.EdgeEntry, readings int) {
	if time.Since(entries[len(entries)-1].Stored) < liveWithin {
		return
	}
	select {
	case <-ctx.Done():
	case <-time.After(time.Duration(float64(readings) / float64(d.config.Settings.Hub.CatchUp) * float64(time.Second))):
	}
}
