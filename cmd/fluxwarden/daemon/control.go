package daemon

import (
	"context"
	"errors"
	"time"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// known says which stations may speak.
func (d *Daemon) known() func(string) bool {
	ids := map[string]bool{}
	for _, id := range d.stationIDs() {
		ids[id] = true
	}
	return func(id string) bool { return ids[id] }
}

// Reload lets another site file hold from the next UTC day on, or refuses it whole and keeps the one in force.
func (d *Daemon) Reload(site *rules.Site, text []byte, err error) error {
	now := d.config.Clock.Now()
	if err == nil {
		err = d.rules.add(storeKeeper{d.archive.Read}, site, text, minute.Stamp(now.UnixMicro()).Day())
	}
	if err != nil {
		d.metrics.Reloaded(false, now)
		d.metrics.Failed("reload")
		return err
	}
	d.metrics.Reloaded(true, now)
	d.metrics.Stations(d.stationIDs())
	d.metrics.Calibrations(d.rules.newest())
	if g := d.gate.Load(); g != nil {
		g.SetKnown(d.known())
		d.follow(d.rules.newest())
	}
	return nil
}

// Address is where the pages are served; empty if they are not.
func (d *Daemon) Address() string { return d.address }

// BrokerURL is where stations send to: the embedded broker's address, or the external one's.
func (d *Daemon) BrokerURL() string {
	if d.embedded != nil {
		return d.embedded.URL()
	}
	return d.config.Settings.Broker.URL
}

const closeGateWait = 2 * time.Second

// Stop ends the daemon: no more readings are taken, what was taken is answered, and what is not committed stays in the journal. It
// takes less than five seconds, unless a last commit was asked for.
func (d *Daemon) Stop() error {
	d.stopOnce.Do(func() {
		Notify("STOPPING=1")
		d.ways.stop()
		if g := d.gate.Load(); g != nil {
			ctx, cancel := context.WithTimeout(context.Background(), closeGateWait)
			d.stopErr = g.Close(ctx)
			cancel()
		}
		d.cancel()
		if d.server != nil {
			shutdownServer(d.server)
		}
		d.done.Wait()
		if n := d.hub.notify.Load(); n != nil {
			d.stopErr = errors.Join(d.stopErr, n.Stop())
		}
		if d.broker != nil {
			d.broker.Close()
		}
		if d.embedded != nil {
			d.embedded.Stop()
		}
		if d.archive != nil {
			d.stopErr = errors.Join(d.stopErr, d.archive.Close())
		}
	})
	return d.stopErr
}
