package daemon

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"time"
)

// What the service manager is told while the daemon starts, works and is in trouble. Without a manager nothing is told.

// Bounds of what the manager is asked to wait for.
const (
	extendBy     = 30 * time.Second
	extendEvery  = 5 * time.Second
	startExtends = 120              // times: opening a large archive or a journal's store may take ten minutes
	replayMax    = 60 * time.Minute // then the daemon counts as started, and goes on reading
	replayStill  = 2 * time.Minute  // without progress for so long, no more time is asked for
	managerHears = time.Microsecond // the unit of what it is told
	clockBegins  = 2020             // a clock before this year is not set
)

func extend() string { return fmt.Sprintf("EXTEND_TIMEOUT_USEC=%d", extendBy/managerHears) }

// ExtendStart asks the manager for time until the function that it gives is called, for ten minutes at most.
func ExtendStart() (started func()) {
	ctx, cancel := context.WithCancel(context.Background())
	go func() {
		timer := time.NewTicker(extendEvery)
		defer timer.Stop()
		for range startExtends {
			select {
			case <-ctx.Done():
				return
			case <-timer.C:
				Notify(extend() + "\nSTATUS=opening archive and journal")
			}
		}
	}()
	return cancel
}

// AwaitReplay returns when a daemon with a broker of its own has read its journal to the end. Meanwhile it asks the manager for
// time, as long as reading goes on. With an external broker it returns at once: that one may be away for long.
func (d *Daemon) AwaitReplay(ctx context.Context, tell func(string)) {
	if d.embedded == nil {
		return
	}
	timer := time.NewTicker(200 * time.Millisecond)
	defer timer.Stop()
	begun, told := time.Now(), time.Time{}
	for time.Since(begun) < replayMax {
		if d.caughtUp.Load() || d.noClock.Load() || d.diskLow.Load() || time.Since(d.lastProgress()) > replayStill {
			return
		}
		if time.Since(told) > extendEvery {
			told = time.Now()
			tell(extend() + "\nSTATUS=reading the journal")
		}
		select {
		case <-ctx.Done():
			return
		case <-timer.C:
		}
	}
}

func (d *Daemon) lastProgress() time.Time { return time.Unix(0, d.progress.Load()) }

// alive says whether the worker goes on: it has ended a step lately, or has none to do yet.
func (d *Daemon) alive() bool { return !d.working.Load() || time.Since(d.lastProgress()) < stuckAfter }

// tellManager pings the watchdog if the worker is alive, and says in words how things stand.
func (d *Daemon) tellManager() {
	why := d.NotReady()
	d.metrics.Ready(why == "")
	text := "STATUS=readings are taken, judged and stored"
	if why != "" {
		text = "STATUS=not ready: " + why
	}
	if d.alive() {
		text += "\nWATCHDOG=1"
	}
	Notify(text)
}

// lookAtClock holds readings back while the clock is not set: their time of receipt would be wrong for ever.
func (d *Daemon) lookAtClock() {
	now := d.config.Clock.Now()
	unset := now.UTC().Year() < clockBegins
	if unset {
		d.metrics.Failed("clock")
	}
	if was := d.noClock.Swap(unset); unset == was {
		return
	}
	if unset {
		d.log.Error("the clock is not set: no reading is taken until it is; set it, or start the time service", "clock", now.UTC().Format(time.RFC3339))
		return
	}
	d.log.Info("the clock is set: readings are taken", "clock", now.UTC().Format(time.RFC3339))
}

// underManager refuses a relative directory where a service manager has given none: it would lie wherever the manager stands.
func underManager(dir string) error {
	if os.Getenv("NOTIFY_SOCKET") == "" || os.Getenv("STATE_DIRECTORY") != "" || filepath.IsAbs(dir) {
		return nil
	}
	return fmt.Errorf("archive %s: the service manager has given no state directory; write StateDirectory=fluxwarden into the unit, or name an absolute directory with --archive", dir)
}

// ReloadSettings lets those of the settings hold that can change while the daemon runs, and names those that wait for a restart.
func (d *Daemon) ReloadSettings(s Settings, err error) error {
	if err == nil {
		err = s.Check()
	}
	if err != nil {
		d.metrics.Failed("reload")
		return err
	}
	if old := d.diskFloor.Swap(int64(s.DiskFloor)); old != int64(s.DiskFloor) {
		d.log.Info("the disk's floor is changed", "floor", s.DiskFloor.String())
		d.lookAtDisk()
	}
	same := s
	same.DiskFloor = d.config.Settings.DiskFloor
	if same != d.config.Settings {
		return errors.New("settings: only disk_floor changes while the daemon runs; the rest of what was changed holds from the next start")
	}
	return nil
}
