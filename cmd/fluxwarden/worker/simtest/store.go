package simtest

import (
	"errors"
	"math/rand/v2"
	"time"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// A disk is the real store on a disk in memory that can lose power.
type disk struct {
	mem   *vfs.Mem
	share float64 // of what is not synced that outlives a power cut
	fs    *vfs.Failing
	store *worker.Store
	skip  func(op string) bool // operations that a planted bug leaves out
	dies  []func() bool        // of the processes that use it
	cut   bool
}

func newDisk(share float64, skip func(op string) bool) *disk {
	return &disk{mem: vfs.NewMem(), share: share, skip: skip}
}

var errPower = errors.New("simulated: no power")

// mount opens the archive on what the disk holds. A death at any operation of the file system takes the machine with it.
func (d *disk) mount() {
	d.cut = false
	d.fs = &vfs.Failing{FS: skipping{d.mem, d.skip}, Fail: func(op, _ string, _ int) error {
		if d.cut {
			return errPower
		}
		for _, dies := range d.dies {
			if op != "open" && op != "stat" && op != "readdir" && dies() {
				d.cut = true
				return errPower
			}
		}
		return nil
	}}
	s, err := worker.OpenStore(d.fs, "/archive", store.Options{CheckpointEvery: 8})
	if err != nil {
		panic(err)
	}
	d.store = s
}

func (d *disk) open(dieAt func() bool) archive {
	if d.store == nil {
		d.mount()
	}
	d.dies = append(d.dies, dieAt)
	return d.store
}

// died says whether a process has met its death, which for a disk is a power cut.
func (d *disk) powerCut() bool { return d.cut }

func (d *disk) powerLoss(seed uint64) {
	d.mem = d.mem.CrashClone(rand.New(rand.NewPCG(seed, 1)), d.share)
	d.store, d.dies = nil, nil
}

func (d *disk) deathsWithin() int { return 60 }

func (d *disk) digestsOf() (map[stationDay]string, error) {
	return storeDigests(d.open(func() bool { return false }).(*worker.Store))
}

// intact says what is wrong with the archive's files at the end: all of June must be sealed and one file by then.
func (d *disk) intact() error {
	s := d.open(func() bool { return false }).(*worker.Store)
	err := s.Read(func(a *store.Archive) error {
		found, err := a.Verify(func(int, int) {})
		if err == nil && len(found) > 0 {
			err = wrong("%d findings of verify, such as %v", len(found), found[0])
		}
		return err
	})
	if err != nil {
		return err
	}
	for _, station := range stationNames {
		minutes := "/archive/minutes/station=" + station
		if july, err := d.mem.ReadDir(minutes + "/month=2026-07"); err != nil || len(july) == 0 {
			continue // the reading of July was lost: the last day of June is still open
		}
		files, err := d.mem.ReadDir(minutes + "/month=2026-06")
		if err == nil && len(files) > 1 {
			return wrong("%s: June is %d files, not one", station, len(files))
		}
	}
	return nil
}

func storeDigests(s *worker.Store) (map[stationDay]string, error) {
	digests := map[stationDay]string{}
	err := s.Read(func(a *store.Archive) error {
		for _, station := range a.Stations() {
			days, err := a.RawDays(station)
			if err != nil {
				return err
			}
			for _, day := range days {
				digest, err := a.RowDigest(station, day)
				if err != nil {
					return err
				}
				if digest == "" {
					continue
				}
				// The clean products of a sealed day are as much a function of its readings as its rows are.
				products := ""
				for _, name := range []string{store.TableCleanMinute, store.TableCleanHour} {
					d, err := a.ProductDigest(station, name, time.Unix(86400*day, 0).UTC().Format(time.DateOnly))
					if err != nil {
						return err
					}
					products += " " + d
				}
				digests[stationDay{station, day}] = digest + products
			}
		}
		return nil
	})
	return digests, err
}

// skipping leaves operations out, as a program with a bug would.
type skipping struct {
	vfs.FS
	skip func(op string) bool
}

func (s skipping) SyncDir(name string) error {
	if s.skip != nil && s.skip("syncdir") {
		return nil
	}
	return s.FS.SyncDir(name)
}

func (s skipping) Create(name string) (vfs.File, error) {
	f, err := s.FS.Create(name)
	if err == nil && s.skip != nil && s.skip("sync") {
		return unsynced{f}, nil
	}
	return f, err
}

type unsynced struct{ vfs.File }

func (unsynced) Sync() error { return nil }
