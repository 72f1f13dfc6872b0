package simtest

import (
	"encoding/json"
	"errors"
	"fmt"
	"slices"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
)

// A memory is the plainest archive there can be: what it has committed it keeps, whole or not at all. It lets the worker be
// attacked apart from the store.
type memory struct {
	records   map[int][]record
	raw       map[stationDay][]*minute.Batch
	digests   map[stationDay]string
	summaries map[stationDay]engine.DaySummary
	faults    map[string][]fault.Episode
	notes     map[string][]rules.Note
	owed      map[int][]store.Owed
}

type record struct {
	epoch     uint64
	positions []worker.Position
}

type stationDay struct {
	station string
	day     int64
}

func newMemory() *memory {
	return &memory{records: map[int][]record{}, raw: map[stationDay][]*minute.Batch{}, digests: map[stationDay]string{},
		summaries: map[stationDay]engine.DaySummary{}, faults: map[string][]fault.Episode{},
		notes: map[string][]rules.Note{}, owed: map[int][]store.Owed{}}
}

// open gives the archive to one worker process, which dies in the commit after so many more of them; never if negative.
func (m *memory) open(dieAt func() bool) archive { return &memorySession{m, dieAt} }

func (m *memory) powerLoss(uint64) {}

func (m *memory) powerCut() bool { return false }

func (m *memory) intact() error { return nil }

func (m *memory) deathsWithin() int { return 6 }

func (m *memory) digestsOf() (map[stationDay]string, error) { return m.digests, nil }

type memorySession struct {
	m     *memory
	dieAt func() bool
}

// died is what a worker process panics with when the simulation kills it.
type died struct{}

func (s *memorySession) Last(partition int) (uint64, []worker.Position, error) {
	r := s.m.records[partition]
	if len(r) == 0 {
		return 0, nil, nil
	}
	return uint64(len(r)), r[len(r)-1].positions, nil
}

func (s *memorySession) Commit(c *worker.Commit) (uint64, error) {
	if s.dieAt() { // before the record is there: nothing of the commit holds
		panic(died{})
	}
	if uint64(len(s.m.records[c.Partition])) != c.Base {
		return 0, worker.ErrLost
	}
	s.m.records[c.Partition] = append(s.m.records[c.Partition], record{c.Epoch, slices.Clone(c.Positions)})
	for _, r := range c.Raw {
		key := stationDay{r.Batch.Station, r.Day}
		s.m.raw[key] = append(s.m.raw[key], worker.CopyBatch(r.Batch))
	}
	for _, d := range c.Days {
		s.m.digests[stationDay{d.Judged.Station, d.Judged.Day}] = digest(d.Judged)
	}
	for _, sum := range c.Summaries {
		s.m.summaries[stationDay{sum.Station, sum.Day}] = through(sum)
	}
	for _, f := range c.Faults {
		s.m.faults[f.Station] = slices.Clone(f.Episodes)
	}
	for _, n := range c.Notes {
		s.m.notes[n.Station] = append(s.m.notes[n.Station], n)
	}
	s.m.owed[c.Partition] = slices.Clone(c.Owed)
	if s.dieAt() { // after it: all of it holds, but the worker never hears of that
		panic(died{})
	}
	return c.Base + 1, nil
}

// through sends a summary through its stored form.
func through(sum engine.DaySummary) engine.DaySummary {
	text, err := json.Marshal(sum)
	if err != nil {
		panic(err)
	}
	var back engine.DaySummary
	if err := json.Unmarshal(text, &back); err != nil {
		panic(err)
	}
	return back
}

func (s *memorySession) ReadRaw(station string, from, to int64, each func(*minute.Batch) error) error {
	for key, batches := range s.m.raw {
		if key.station != station || key.day < from || key.day > to {
			continue
		}
		for _, b := range batches {
			if err := each(b); err != nil {
				return err
			}
		}
	}
	return nil
}

func (s *memorySession) Summaries(station string, from, to int64) ([]engine.DaySummary, error) {
	var sums []engine.DaySummary
	for key, sum := range s.m.summaries {
		if key.station == station && key.day >= from && key.day <= to {
			sums = append(sums, sum)
		}
	}
	slices.SortFunc(sums, func(a, b engine.DaySummary) int { return int(a.Day - b.Day) })
	return sums, nil
}

func (s *memorySession) Faults(station string) ([]fault.Episode, error) {
	return slices.Clone(s.m.faults[station]), nil
}

func (s *memorySession) Notes(station string) ([]rules.Note, error) {
	return slices.Clone(s.m.notes[station]), nil
}

func (s *memorySession) Owed(partition int) ([]store.Owed, error) {
	return slices.Clone(s.m.owed[partition]), nil
}

func (s *memorySession) DropRaw(_ int, base uint64, _ string, _ int64) (uint64, error) {
	return base, nil
}

func (s *memorySession) Compact(_ int, base uint64, _, _ string) (uint64, error) { return base, nil }

// An archive is what a worker stands on, for one life of it.
type archive interface{ worker.Archive }

// A backend keeps archives over crashes.
type backend interface {
	open(dieAt func() bool) archive
	powerLoss(seed uint64)
	powerCut() bool // since the last powerLoss a process has died in the file system, and the machine with it
	intact() error
	deathsWithin() int // calls of dieAt in which a death is worth trying
	digestsOf() (map[stationDay]string, error)
}

var errCheck = errors.New("simulation")

func wrong(format string, args ...any) error {
	return fmt.Errorf("%w: %s", errCheck, fmt.Sprintf(format, args...))
}
