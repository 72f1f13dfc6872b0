package worker

import (
	"encoding/json"
	"errors"
	"fmt"
	"slices"
	"sync"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// A Store is the archive of the package store as the worker's Archive. After a commit that ended half-way it opens the
// archive anew. Several workers may share it.
type Store struct {
	fs      vfs.FS
	dir     string
	options store.Options

	mu      sync.RWMutex
	archive *store.Archive
	broken  error
	closed  bool
}

// OpenStore opens the archive for writing, making it if it is not there.
func OpenStore(fs vfs.FS, dir string, o store.Options) (*Store, error) {
	a, err := store.OpenForWriting(fs, dir, o)
	if err != nil {
		return nil, err
	}
	return &Store{fs: fs, dir: dir, options: o, archive: a}, nil
}

// use runs f on the archive, opening it anew if need be.
func (s *Store) use(f func(a *store.Archive) error) error {
	s.mu.RLock()
	if s.broken == nil && !s.closed {
		defer s.mu.RUnlock()
		return f(s.archive)
	}
	s.mu.RUnlock()
	if err := s.mend(); err != nil {
		return err
	}
	s.mu.RLock()
	defer s.mu.RUnlock()
	return f(s.archive)
}

var errClosed = errors.New("the archive is closed")

func (s *Store) mend() error {
	s.mu.Lock()
	defer s.mu.Unlock()
	switch {
	case s.closed:
		return errClosed
	case s.broken == nil:
		return nil
	}
	if s.archive != nil {
		s.archive.Close() // what it cannot write any more is made again when it is opened
		s.archive = nil
	}
	a, err := store.OpenForWriting(s.fs, s.dir, s.options)
	if err != nil {
		return fmt.Errorf("archive is opened anew after a commit that ended half-way: %w", err)
	}
	s.archive, s.broken = a, nil
	return nil
}

// Close gives the archive up.
func (s *Store) Close() error {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed || s.archive == nil {
		s.closed = true
		return nil
	}
	s.closed = true
	return s.archive.Close()
}

// Read runs f on the archive, for what the worker itself has no need of.
func (s *Store) Read(f func(a *store.Archive) error) error { return s.use(f) }

// of runs f on the archive if it has something of the station.
func (s *Store) of(station string, f func(a *store.Archive) error) error {
	return s.use(func(a *store.Archive) error {
		if _, found := slices.BinarySearch(a.Stations(), station); !found {
			return nil
		}
		return f(a)
	})
}

// stampStream is the stream name under which a record keeps when the message of a position was stored.
func stampStream(stream string) string { return stream + ".stored" }

// Last implements Archive.
func (s *Store) Last(partition int) (base uint64, positions []Position, err error) {
	err = s.use(func(a *store.Archive) error {
		r, ok, err := a.Last(partition)
		if err != nil || !ok {
			return err
		}
		base = r.Number
		stamps := map[string]int64{}
		for _, p := range r.Positions {
			stamps[p.Stream] = p.Created
		}
		for _, p := range r.Positions {
			if _, ok := stamps[stampStream(p.Stream)]; ok {
				positions = append(positions, Position{p.Stream, p.Created, p.Seq, stamps[stampStream(p.Stream)]})
			}
		}
		return nil
	})
	return base, positions, err
}

// Commit implements Archive.
func (s *Store) Commit(c *Commit) (number uint64, err error) {
	out := &store.Commit{Partition: c.Partition, Base: c.Base, Epoch: c.Epoch, RulesDigest: c.RulesDigest, Program: c.Program, Time: c.Time}
	for _, p := range c.Positions {
		out.Positions = append(out.Positions, store.Position{Stream: p.Stream, Created: p.Created, Seq: p.Seq},
			store.Position{Stream: stampStream(p.Stream), Created: p.Stamp, Seq: p.Seq})
	}
	for _, r := range c.Raw {
		out.Raw = append(out.Raw, store.RawPart{Day: r.Day, Batch: r.Batch})
	}
	for _, d := range c.Days {
		out.Days = append(out.Days, store.Day{Judged: d.Judged, Sealed: d.Sealed})
	}
	for _, f := range c.Faults {
		out.Faults = append(out.Faults, store.StationFaults{Station: f.Station, Episodes: f.Episodes})
	}
	out.Notes, out.DayReasons, out.Owed = c.Notes, c.DayReasons, c.Owed
	if out.Owed == nil {
		out.Owed = []store.Owed{} // all is paid
	}
	for _, sum := range c.Summaries {
		text, err := json.Marshal(sum)
		if err != nil {
			return 0, fmt.Errorf("summary of %s: %w", sum.Station, err)
		}
		out.Summaries = append(out.Summaries, store.Summary{Station: sum.Station, Day: sum.Day, JSON: text})
	}
	err = s.use(func(a *store.Archive) error {
		r, err := a.Commit(out)
		number = r.Number
		return err
	})
	switch {
	case errors.Is(err, store.ErrLostPartition):
		return 0, fmt.Errorf("%w: %w", ErrLost, err)
	case err != nil && !errors.Is(err, errClosed):
		s.mu.Lock()
		s.broken = err
		s.mu.Unlock()
	}
	return number, err
}

// ReadRaw implements Archive.
func (s *Store) ReadRaw(station string, from, to int64, each func(*minute.Batch) error) error {
	return s.of(station, func(a *store.Archive) error { return a.ReadRaw(station, from, to, each) })
}

// Summaries implements Archive.
func (s *Store) Summaries(station string, from, to int64) (sums []engine.DaySummary, err error) {
	err = s.of(station, func(a *store.Archive) error {
		list, err := a.Summaries(station, from, to)
		if err != nil {
			return err
		}
		sums = make([]engine.DaySummary, len(list))
		for i := range list {
			if err := json.Unmarshal(list[i].JSON, &sums[i]); err != nil {
				return fmt.Errorf("summary of %s, day %d: %w", station, list[i].Day, err)
			}
		}
		return nil
	})
	return sums, err
}

// Faults implements Archive.
func (s *Store) Faults(station string) (list []fault.Episode, err error) {
	err = s.of(station, func(a *store.Archive) error { list, err = a.Faults(station); return err })
	return list, err
}

// Notes implements Archive.
func (s *Store) Notes(station string) (list []rules.Note, err error) {
	err = s.of(station, func(a *store.Archive) error { list, err = a.Notes(station); return err })
	return list, err
}

// Owed implements Archive.
func (s *Store) Owed(partition int) (list []store.Owed, err error) {
	err = s.use(func(a *store.Archive) error {
		r, _, err := a.Last(partition)
		list = r.Owed
		return err
	})
	return list, err
}

// Compact implements Archive.
func (s *Store) Compact(partition int, base uint64, station, month string) (number uint64, err error) {
	return s.after(partition, base, func(a *store.Archive) error { return a.Compact(partition, station, month) })
}

// DropRaw implements Archive.
func (s *Store) DropRaw(partition int, base uint64, station string, before int64) (number uint64, err error) {
	return s.after(partition, base, func(a *store.Archive) error {
		_, _, err := a.DropRaw(partition, station, before)
		return err
	})
}

// after does something that makes a record of its own, if the record base is the last one, and gives the last one then.
func (s *Store) after(partition int, base uint64, do func(a *store.Archive) error) (number uint64, err error) {
	lost := false
	err = s.use(func(a *store.Archive) error {
		r, _, err := a.Last(partition)
		if err != nil {
			return err
		}
		if lost = r.Number != base; lost {
			return ErrLost
		}
		if err := do(a); err != nil {
			return err
		}
		r, _, err = a.Last(partition)
		number = r.Number
		return err
	})
	if err != nil && !lost && !errors.Is(err, errClosed) {
		s.mu.Lock()
		s.broken = err
		s.mu.Unlock()
	}
	return number, err
}
