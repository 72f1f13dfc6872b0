package daemon

import (
	"context"
	"fmt"
	"maps"
	"slices"
	"time"

	"fluxwarden/store"
)

// sizesEvery is how often the archive's files are added up: a walk over some ten thousand of them takes a tenth of a second.
const sizesEvery = time.Minute

// checkBudget refuses a disk budget that leaves nothing for an archive. One that the archive has outgrown is no reason not to start: readings are
// refused then, and taken again when there is room.
func (d *Daemon) checkBudget() error {
	s := &d.config.Settings
	journal := d.journalBound()
	if need := journal + int64(s.DiskFloor); s.DiskBudget > 0 && need >= int64(s.DiskBudget) {
		return &Unusable{fmt.Errorf("settings: disk_budget: %v: the journal's streams may take %v and disk_floor keeps %v free, which leaves nothing for the archive; raise disk_budget or lower broker: journal or disk_floor",
			s.DiskBudget, Size(journal), s.DiskFloor)}
	}
	return nil
}

// journalBound is what the streams of a broker in this process may take.
func (d *Daemon) journalBound() int64 {
	if d.config.Settings.Broker.URL != "" {
		return 0
	}
	return d.streams().Bytes()
}

// watchArchive adds up the archive's files until the context ends.
func (d *Daemon) watchArchive(ctx context.Context) {
	timer := time.NewTicker(sizesEvery)
	defer timer.Stop()
	for {
		d.lookAtArchive()
		select {
		case <-ctx.Done():
			return
		case <-timer.C:
		}
	}
}

// lookAtArchive holds the archive's size against the budget and trims the replaced revisions if the settings bound them.
func (d *Daemon) lookAtArchive() {
	s := &d.config.Settings
	var sizes map[string]int64
	err := d.archive.Read(func(a *store.Archive) (err error) { sizes, err = a.Sizes(); return err })
	if err == nil && s.KeepSuperseded > 0 && sizes["superseded"] > int64(s.KeepSuperseded) {
		err = d.trimSuperseded(sizes)
	}
	if err != nil {
		d.metrics.Failed("disk")
		d.log.Error("the archive's size is not known", "cause", err)
		return
	}
	total := int64(0)
	for _, part := range slices.Sorted(maps.Keys(sizes)) {
		d.metrics.ArchiveSize(part, sizes[part])
		total += sizes[part]
	}
	over := s.DiskBudget > 0 && total+d.journalBound()+int64(s.DiskFloor) > int64(s.DiskBudget)
	if was := d.overBudget.Swap(over); over && !was {
		d.log.Error("the disk budget is used up: no reading is taken until it is raised or files are moved away", "budget", s.DiskBudget.String(),
			"archive", Size(total).String(), "journal", Size(d.journalBound()).String(), "reserve", s.DiskFloor.String())
	} else if was && !over {
		d.log.Info("the disk budget has room again: readings are taken")
	}
}

func (d *Daemon) trimSuperseded(sizes map[string]int64) error {
	return d.archive.Read(func(a *store.Archive) error {
		n, err := a.TrimSuperseded(int64(d.config.Settings.KeepSuperseded))
		if err != nil || n == 0 {
			return err
		}
		d.log.Info("the earliest replaced revisions are deleted, as keep_superseded says", "files", n)
		after, err := a.Sizes()
		if err == nil {
			sizes["superseded"] = after["superseded"]
		}
		return err
	})
}
