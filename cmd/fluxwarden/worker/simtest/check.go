package simtest

import (
	"cmp"
	"fmt"
	"maps"
	"reflect"
	"slices"
	"time"

	"fluxwarden/ingest/wire"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// Run simulates a seed and says what is wrong at its end; nil if all is well.
func Run(seed uint64, o Options) (counts map[string]int, err error) {
	w, err := newWorld(seed, o)
	if err != nil {
		return nil, err
	}
	w.run()
	return w.counts, w.check()
}

func (w *world) check() error {
	if err := w.backend.intact(); err != nil {
		return err
	}
	kept, err := w.keptValues()
	if err != nil {
		return err
	}
	if len(kept.twice) > 0 {
		return wrong("%d values are in raw twice, such as %v", len(kept.twice), kept.twice[0])
	}
	for _, id := range slices.Sorted(maps.Keys(w.acked)) {
		if a := &w.all[id]; !w.lost[id] && !kept.holds(a) {
			return wrong("an acknowledged reading is not in raw: %s %s", a.station, describe(&a.reading))
		}
	}
	sent := map[identity]bool{}
	for i := range w.all {
		sent[identity{station: w.all[i].station, at: w.all[i].reading.At}] = true
		for _, v := range w.all[i].reading.Values {
			sent[identify(w.all[i].station, w.all[i].reading.At, &v)] = true
		}
	}
	for key := range kept.values {
		if !sent[key] {
			return wrong("raw has a value that nobody sent: %v", key)
		}
	}
	notes, err := w.checkNotes()
	if err != nil {
		return err
	}
	return w.compareWithClean(kept, notes)
}

// kept is what raw holds.
type kept struct {
	readings map[string][]minute.Reading // by station
	values   map[identity]bool
	twice    []identity
}

// An identity is what identifies a value, and the value; without a channel it is a stamp that was sent.
type identity struct {
	station string
	at      minute.Stamp
	channel string
	mean    float64
}

func identify(station string, at minute.Stamp, v *minute.ChannelValue) identity {
	return identity{station, at, v.Channel, v.Mean}
}

func (k *kept) holds(a *arrival) bool {
	for _, v := range a.reading.Values {
		if !k.values[identify(a.station, a.reading.At, &v)] {
			return false
		}
	}
	return k.values[identity{station: a.station, at: a.reading.At}]
}

func (w *world) keptValues() (*kept, error) {
	k := &kept{readings: map[string][]minute.Reading{}, values: map[identity]bool{}}
	a := w.backend.open(func() bool { return false })
	from, to := minute.Stamp(begin.UnixMicro()).Day()-40, minute.Stamp(begin.UnixMicro()).Day()+40
	for _, station := range stationNames {
		err := a.ReadRaw(station, from, to, func(b *minute.Batch) error {
			for i := range b.At {
				r := b.Reading(i)
				k.values[identity{station: station, at: r.At}] = true
				k.readings[station] = append(k.readings[station], r)
				for _, v := range r.Values {
					key := identify(station, r.At, &v)
					if k.values[key] {
						k.twice = append(k.twice, key)
					}
					k.values[key] = true
				}
			}
			return nil
		})
		if err != nil {
			return nil, err
		}
	}
	return k, nil
}

// compareWithClean gives the very readings that raw holds, in order, and the notes before them to one worker that nothing happens to, and compares
// what comes of them.
func (w *world) compareWithClean(k *kept, notes []rules.Note) error {
	clean, err := newWorld(0, Options{Days: w.o.Days, Calm: true, Backend: w.o.cleanBackend(), Trap: w.o.Trap})
	if err != nil {
		return err
	}
	clean.arrivals, clean.now, clean.notes = nil, w.now, nil
	for _, n := range notes {
		clean.changes.append(n)
	}
	for _, station := range stationNames {
		readings := k.readings[station]
		slices.SortStableFunc(readings, func(a, b minute.Reading) int { return cmp.Compare(a.At, b.At) })
		for len(readings) > 0 {
			n := min(len(readings), 50)
			clean.journal.append(partitionOf[station], []wire.Group{{Station: station, Readings: readings[:n]}}, nil)
			readings = readings[n:]
		}
	}
	clean.finish()
	got, err := w.backend.digestsOf()
	if err != nil {
		return err
	}
	want, err := clean.backend.digestsOf()
	if err != nil {
		return err
	}
	keys := slices.SortedFunc(maps.Keys(want), func(a, b stationDay) int { return cmp.Or(cmp.Compare(a.station, b.station), cmp.Compare(a.day, b.day)) })
	for _, key := range keys {
		if got[key] != want[key] {
			return wrong("%s on %s: rows are not those of a clean run: %s, clean %s", key.station, time.UnixMicro(key.day*minute.MicrosPerDay).UTC().Format(time.DateOnly), got[key], want[key])
		}
	}
	if len(got) != len(want) {
		return wrong("%d station-days have rows; a clean run has %d", len(got), len(want))
	}
	return w.compareFaults(clean)
}

func (w *world) compareFaults(clean *world) error {
	a, b := w.backend.open(func() bool { return false }), clean.backend.open(func() bool { return false })
	for _, station := range stationNames {
		got, err := a.Faults(station)
		if err != nil {
			return err
		}
		want, err := b.Faults(station)
		if err != nil {
			return err
		}
		if len(got)+len(want) > 0 && !reflect.DeepEqual(got, want) {
			return wrong("%s: the episodes are not those of a clean run:\n%s\nclean:\n%s", station, list(got), list(want))
		}
		w.counts["episodes"] += len(got)
	}
	return nil
}

func list(episodes []fault.Episode) (s string) {
	for _, e := range episodes {
		s += fmt.Sprintf("  %+v\n", e)
	}
	return s
}
