package simtest

import (
	"context"
	"slices"
	"time"
)

// chaos does one of the things that go wrong, now and then.
func (w *world) chaos() {
	if w.rng.IntN(12) > 0 {
		return
	}
	i := w.rng.IntN(processes)
	p := &w.procs[i]
	switch w.rng.IntN(14) {
	case 0, 1: // kill -9
		*p = process{}
		w.counts["kills"]++
	case 2, 3: // it will die in the middle of a commit
		if p.w != nil {
			p.dieIn = 1 + w.rng.IntN(w.backend.deathsWithin())
		}
	case 4, 5: // partitions change hands
		for _, part := range partitions {
			w.owner[part] = w.rng.IntN(processes)
		}
		w.epoch++
	case 6, 7: // partitions change hands, and the one that had them does not hear of it
		if p.w != nil && p.frozen == nil {
			p.frozen, _ = lease{w, i}.Owned(context.Background(), w.now)
			for _, part := range partitions {
				w.owner[part] = 1 - i
			}
			w.epoch++
			w.counts["zombies"]++
		}
	case 8: // it hears again
		p.frozen = nil
	case 9: // the broker loses power: what it has not acknowledged is gone, and its numbers are given again
		w.counts["broker power cuts"]++
		w.resend(w.journal.powerLoss)
		w.changes.powerLoss()
	case 10: // the archive's machine loses power
		w.counts["archive power cuts"]++
		w.cutPower()
	case 11:
		w.clockSlips()
	case 12:
		w.brokerFails()
	case 13:
		w.changesFail()
	}
}

// resend does something to the journal; the senders of what is gone unacknowledged send it again.
func (w *world) resend(f func()) {
	before := w.journal.unacked()
	f()
	for _, id := range before {
		a := w.all[id]
		a.at = w.now.Add(time.Duration(w.rng.IntN(900)) * time.Second)
		w.arrivals = append(w.arrivals, a)
	}
	slices.SortStableFunc(w.arrivals, func(a, b arrival) int { return a.at.Compare(b.at) })
}

// clockSlips sets the clock of this machine back or on for a while.
func (w *world) clockSlips() {
	w.counts["clock slips"]++
	w.now = w.now.Add(time.Duration(w.rng.IntN(1200)-600) * time.Second)
}

// brokerFails lets the broker break its promise. What it has lost before the archive had it is lost to all.
func (w *world) brokerFails() {
	w.resend(func() {
		switch w.rng.IntN(3) {
		case 0:
			w.counts["journals remade"]++
			w.forget(w.journal.remake())
		case 1:
			w.counts["acknowledged tails lost"]++
			w.forget(w.journal.loseTail(1 + w.rng.IntN(5)))
		case 2:
			w.counts["journals trimmed"]++
			w.journal.powerLoss()
			w.forget(w.journal.trim(w.rng.IntN(len(w.journal.messages) + 1)))
		}
	})
}

// forget notes which of the lost messages' readings the archive does not have.
func (w *world) forget(lost []message) {
	if len(lost) == 0 {
		return
	}
	kept, err := w.keptValues()
	if err != nil {
		panic(err)
	}
	for _, m := range lost {
		for _, id := range m.ids {
			if !kept.holds(&w.all[id]) {
				w.lost[id] = true
			}
		}
	}
}
