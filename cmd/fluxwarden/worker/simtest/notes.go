package simtest

import (
	"context"
	"fmt"
	"math/rand/v2"
	"slices"
	"time"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/rules"
)

// A changeFeed is the stream of notes. It fails as the journal does, but keeps no cursor.
type changeFeed struct {
	w        *world
	created  int64
	last     uint64
	messages []worker.Change
	synced   int // of the messages
}

func (f *changeFeed) append(n rules.Note) {
	f.last++
	f.messages = append(f.messages, worker.Change{Seq: f.last, Stamp: f.w.stamp(), Partition: partitionOf[n.Station], Note: n})
}

// sync makes durable what was appended; its notes are acknowledged by it.
func (f *changeFeed) sync() {
	for _, m := range f.messages[f.synced:] {
		f.w.ackedNotes[m.Note.ID] = m.Note
	}
	f.synced = len(f.messages)
}

// powerLoss drops what was not synced, and gives its numbers again. Those who wrote these notes give them once more.
func (f *changeFeed) powerLoss() {
	for _, m := range f.messages[f.synced:] {
		f.w.notes = append(f.w.notes, plannedNote{f.w.now.Add(time.Minute), m.Note})
	}
	f.last -= uint64(len(f.messages) - f.synced)
	f.messages = f.messages[:f.synced]
}

// remake deletes the stream and makes it anew. What the archive did not have by then is lost.
func (f *changeFeed) remake() {
	f.powerLoss()
	f.lose(f.messages)
	f.messages, f.synced, f.last, f.created = nil, 0, 0, f.w.stamp()
}

// loseTail drops acknowledged notes from the end.
func (f *changeFeed) loseTail(n int) {
	f.powerLoss()
	n = min(n, len(f.messages))
	f.lose(f.messages[len(f.messages)-n:])
	f.messages = f.messages[:len(f.messages)-n]
	f.last, f.synced = f.last-uint64(n), len(f.messages)
}

func (f *changeFeed) lose(gone []worker.Change) {
	for _, m := range gone {
		f.w.lostNotes[m.Note.ID] = true // or not: where the archive has it, it must stay
	}
}

func (f *changeFeed) first() uint64 {
	if len(f.messages) > 0 {
		return f.messages[0].Seq
	}
	return f.last + 1
}

func (f *changeFeed) State(context.Context) (worker.StreamState, error) {
	return worker.StreamState{Stream: worker.ChangesStream, Created: f.created, First: f.first(), Last: f.last}, nil
}

func (f *changeFeed) StampOf(_ context.Context, seq uint64) (int64, bool, error) {
	if first := f.first(); len(f.messages) > 0 && seq >= first && seq <= f.last {
		return f.messages[seq-first].Stamp, true, nil
	}
	return 0, false, nil
}

func (f *changeFeed) Read(_ context.Context, from uint64) ([]worker.Change, error) {
	var list []worker.Change
	for _, m := range f.messages {
		if m.Seq >= from && len(list) < 3 {
			list = append(list, m)
		}
	}
	return list, nil
}

func (f *changeFeed) Purge(context.Context, uint64) error { return nil }

// A plannedNote is a note that somebody will give at a time.
type plannedNote struct {
	at   time.Time
	note rules.Note
}

// planNotes makes up what people say over the days: of times past, now and to come, some of it twice, some taken back.
func planNotes(rng *rand.Rand, days int) []plannedNote {
	var all []plannedNote
	instruments := map[string][]string{"anvil": {"G1", "D1", "", "logger"}, "birch": {"G1", ""}, "cairn": {"G1", "", "tracker"}}
	for range 2 + rng.IntN(6) {
		station := stationNames[rng.IntN(len(stationNames))]
		at := begin.Add(time.Duration(rng.Int64N(int64(days+2)*24*60)) * time.Minute)
		if rng.IntN(2) == 0 { // long after: the days are sealed, and no start looks at them by itself
			at = begin.Add(time.Duration(rng.Int64N(int64(lastSent.Sub(begin)/time.Minute))) * time.Minute)
		}
		n := rules.Note{Station: station, Instrument: instruments[station][rng.IntN(len(instruments[station]))], By: "A. Keeper", Made: at,
			Kind: []rules.NoteKind{rules.Remark, rules.Maintenance, rules.Cleaning, rules.Levelling, rules.Exchange, rules.Override, rules.Override}[rng.IntN(7)]}
		n.From = begin.Add(time.Duration(rng.Int64N(int64(days)*24*60)) * time.Minute)
		n.To = n.From.Add(time.Duration(1+rng.IntN([]int{30, 400, 3000}[rng.IntN(3)])) * time.Minute)
		if n.Kind == rules.Override {
			n.Text, n.Quantity = "as seen", "global"
			n.Verdict = []string{"accepted", "questioned", "rejected"}[rng.IntN(3)]
			if n.Instrument != "" {
				n.Instrument = "G1"
			}
		}
		all = append(all, plannedNote{at, sealedNote(n)})
		switch rng.IntN(5) {
		case 0: // once more
			all = append(all, plannedNote{at.Add(time.Duration(rng.IntN(600)) * time.Minute), all[len(all)-1].note})
		case 1: // taken back, now and then before it came
			later := at.Add(time.Duration(rng.IntN(2000)-60) * time.Minute)
			all = append(all, plannedNote{later, sealedNote(rules.Note{Station: station, Kind: rules.Withdrawal, Withdraws: all[len(all)-1].note.ID, By: "A. Keeper", Made: later})})
		}
	}
	slices.SortStableFunc(all, func(a, b plannedNote) int { return a.at.Compare(b.at) })
	return all
}

func sealedNote(n rules.Note) rules.Note {
	if err := n.Seal(); err != nil {
		panic(err)
	}
	return n
}

// say puts the notes whose time has come into the stream.
func (w *world) say() {
	due := w.notes
	w.notes = nil
	for _, n := range due {
		if n.at.After(w.now) {
			w.notes = append(w.notes, n)
			continue
		}
		w.changes.append(n.note)
		w.counts["notes given"]++
		if !w.o.Calm && w.rng.IntN(3) == 0 { // whoever takes it dies in the commit that has it, with its days still owed
			for i := range w.procs {
				w.procs[i].dieIn = 2
			}
		}
	}
	if w.o.Calm || w.rng.IntN(4) > 0 {
		w.changes.sync()
	}
}

// changesFail lets the stream of notes break its promise.
func (w *world) changesFail() {
	switch w.rng.IntN(3) {
	case 0:
		w.counts["notes: stream remade"]++
		w.changes.remake()
	case 1:
		w.counts["notes: tails lost"]++
		w.changes.loseTail(1 + w.rng.IntN(2))
	case 2:
		w.changes.powerLoss()
	}
}

// checkNotes looks whether every note that was acknowledged and not lost is in the archive once, and gives those that are there.
func (w *world) checkNotes() ([]rules.Note, error) {
	a := w.backend.open(func() bool { return false })
	var all []rules.Note
	have := map[string]bool{}
	for _, station := range stationNames {
		list, err := a.Notes(station)
		if err != nil {
			return nil, err
		}
		for _, n := range list {
			if have[n.ID] && !w.twiceIsFine() {
				return nil, wrong("note %s is in the archive twice", n.ID)
			}
			have[n.ID] = true
			all = append(all, n)
		}
	}
	for id, n := range w.ackedNotes {
		if !have[id] && !w.lostNotes[id] {
			return nil, wrong("an acknowledged note is not in the archive: %s", fmt.Sprint(n))
		}
	}
	return all, nil
}

// twiceIsFine says whether the archive is the plain one in memory, which appends and leaves it to the worker to see what it knows.
func (w *world) twiceIsFine() bool { _, ok := w.backend.(*memory); return ok }
