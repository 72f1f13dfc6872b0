package worker

import (
	"context"
	"errors"
	"fmt"
	"maps"
	"slices"
	"time"

	"fluxwarden/qc/minute"
	"fluxwarden/store"
)

// A partition is a set of stations and what was committed of it last.
type partition struct {
	number    int
	epoch     uint64
	base      uint64                  // the number of the last commit
	position  Position                // of that commit
	taken     Position                // messages up to this one are with the stations or in the archive
	changes   Position                // of the stream of notes, as of that commit
	heard     Position                // notes up to this one are with the stations or in the archive
	looked    bool                    // whether heard was held against the stream
	owed      map[string][]store.Owed // days to be judged once more, of stations whose state has not been made yet
	due       bool                    // what was owed is paid: a commit should carry it soon
	stations  map[string]*station
	waiting   []string // declared stations whose state has not been made yet
	rows      int      // readings that wait for a commit
	dirty     bool     // something else waits for one
	committed time.Time
	wait      time.Duration // after a commit that did not come off
	retryAt   time.Time
}

// adopt takes a partition over from the archive.
func (w *Worker) adopt(n int, epoch uint64, now time.Time) (*partition, error) {
	base, positions, err := w.cfg.Archive.Last(n)
	if err != nil {
		return nil, fmt.Errorf("partition %d: last commit: %w", n, err)
	}
	p := &partition{number: n, epoch: epoch, base: base, stations: map[string]*station{}, owed: map[string][]store.Owed{}, waiting: slices.Clone(w.cfg.Rules.Stations(n))}
	p.position, p.changes = journalAndChanges(positions)
	p.taken, p.heard = p.position, p.changes
	owed, err := w.cfg.Archive.Owed(n)
	if err != nil {
		return nil, fmt.Errorf("partition %d: days owed: %w", n, err)
	}
	for _, o := range owed {
		p.owed[o.Station] = append(p.owed[o.Station], o)
	}
	// Partitions commit one after the other and not all at once: the readers of the journal then never wait long.
	p.committed = now.Add(-w.cfg.CommitEvery * time.Duration(n%partitionCount) / partitionCount)
	return p, nil
}

// journalAndChanges picks the two streams' positions.
func journalAndChanges(positions []Position) (journal, changes Position) {
	for _, p := range positions {
		if p.Stream == ChangesStream {
			changes = p
		} else {
			journal = p
		}
	}
	return journal, changes
}

// openCursor reads the journal from the least position of the partitions, after holding each against the stream.
func (w *Worker) openCursor(ctx context.Context) error {
	w.closeCursor()
	st, err := w.cfg.Journal.State(ctx)
	if err != nil {
		return err
	}
	numbers := slices.Sorted(maps.Keys(w.partitions))
	checked := map[Position]string{}
	for _, n := range numbers {
		p := w.partitions[n]
		if _, ok := checked[p.taken]; !ok {
			if checked[p.taken], err = w.mismatch(ctx, p.taken, st); err != nil {
				return err
			}
		}
	}
	from := ^uint64(0)
	for _, n := range numbers {
		p := w.partitions[n]
		p.startFrom(w, st, checked[p.taken])
		from = min(from, p.taken.Seq)
	}
	cursor, err := w.cfg.Journal.Open(ctx, numbers, max(from+1, st.First))
	if err != nil {
		return err
	}
	w.cursor, w.reopen, w.failing = cursor, false, ""
	w.caughtUp = cursor.Pending() == 0
	w.stream = st
	return nil
}

// startFrom sets the position from which the partition goes on in a stream that is, or is not, the one it was read from.
func (p *partition) startFrom(w *Worker, st StreamState, reason string) {
	if reason != "" {
		w.cfg.Meter.JournalGap(reason)
		w.log.Warn("the journal is not what it was when it was read last", "reason", reason, "partition", p.number, "stream", st.Stream,
			"read_to", p.taken.Seq, "first", st.First, "last", st.Last)
	}
	switch {
	case reason == GapPurged:
		p.taken = Position{Stream: st.Stream, Created: st.Created, Seq: st.First - 1}
	case reason != "" || p.taken.Created == 0:
		p.taken = Position{Stream: st.Stream, Created: st.Created}
	}
}

// mismatch says why the stream is not one in which the position holds; nothing if it is.
func (w *Worker) mismatch(ctx context.Context, at Position, st StreamState) (string, error) {
	switch {
	case at.Created == 0 || w.cfg.Faulty.TrustAnyJournal:
		return "", nil
	case at.Created != st.Created || at.Stream != st.Stream:
		return GapRecreate, nil
	case at.Seq > st.Last:
		return GapReused, nil
	case at.Seq+1 < st.First:
		return GapPurged, nil
	case at.Seq == 0 || at.Stamp == 0 || at.Seq < st.First:
		return "", nil
	}
	stamp, found, err := w.cfg.Journal.StampOf(ctx, at.Seq)
	if err != nil {
		return "", err
	}
	if found && stamp != at.Stamp {
		return GapReused, nil
	}
	return "", nil
}

// advanceTo notes that a message was read: every partition that the cursor reads has had all its messages up to it.
func (w *Worker) advanceTo(d *Delivery) {
	for _, p := range w.partitions {
		if d.Seq > p.taken.Seq {
			p.taken.Seq, p.taken.Stamp = d.Seq, d.Stamp
		}
	}
}

// commitDue commits the partitions whose time has come.
func (w *Worker) commitDue(ctx context.Context, now time.Time) {
	for n := range partitionCount {
		p := w.partitions[n]
		if p == nil {
			continue
		}
		if now.Before(p.committed) { // the clock was set back
			p.committed = now
		}
		since := now.Sub(p.committed)
		due := p.rows >= w.cfg.CommitRows || since >= w.cfg.CommitEvery && (p.rows > 0 || p.dirty) ||
			p.due || since >= idlePositionEvery && p.base > 0 && (p.taken.Seq > p.position.Seq || p.heard.Seq > p.changes.Seq)
		if due && !now.Before(p.retryAt) {
			w.commit(ctx, p, now)
		}
	}
}

// CommitAll commits all that waits, whatever the time.
func (w *Worker) CommitAll(ctx context.Context) {
	now := w.cfg.Clock.Now()
	for _, n := range slices.Sorted(maps.Keys(w.partitions)) {
		if p := w.partitions[n]; p.rows > 0 || p.dirty {
			w.commit(ctx, p, now)
		}
	}
}

func (w *Worker) commit(ctx context.Context, p *partition, now time.Time) {
	c := &Commit{Partition: p.number, Base: p.base, Epoch: p.epoch, Positions: []Position{p.taken}, RulesDigest: w.cfg.Rules.Digest(),
		Program: w.cfg.Program, Time: now}
	if w.cfg.Faulty.PositionEarly && w.cursor != nil {
		c.Positions[0].Seq += w.cursor.Pending()
		c.Positions[0].Stamp = 0
	}
	if p.heard.Created != 0 {
		c.Positions = append(c.Positions, p.heard)
	}
	for _, id := range slices.Sorted(maps.Keys(p.owed)) {
		c.Owed = append(c.Owed, p.owed[id]...)
	}
	ids := slices.Sorted(maps.Keys(p.stations))
	prepared := make([]*prepared, 0, len(ids))
	for _, id := range ids {
		pr, err := p.stations[id].prepare(ctx, now, c)
		if err != nil {
			w.drop(p.number, "read_archive", fmt.Errorf("station %s: %w", id, err))
			return
		}
		prepared = append(prepared, pr)
	}
	base, err := w.cfg.Archive.Commit(c)
	rows := p.rows
	w.cfg.Meter.Committed(w.cfg.Clock.Now().Sub(now), rows, err)
	if errors.Is(err, ErrLost) && w.cfg.Faulty.KeepAfterLost {
		base, err = p.base+1, nil
	}
	switch {
	case errors.Is(err, ErrLost):
		w.drop(p.number, "commit", err)
		return
	case err != nil:
		p.wait = min(max(2*p.wait, retryAfter), retryAfterMax)
		p.retryAt = now.Add(p.wait)
		w.fail("commit", "a commit did not come off; it is tried again, and the journal keeps the readings", err, "partition", p.number)
		return
	}
	if p.wait > 0 {
		w.log.Info("commits come off again", "partition", p.number)
	}
	p.base, p.position, p.committed, p.rows, p.dirty, p.wait, w.failing = base, c.Positions[0], now, 0, false, 0, ""
	p.changes, p.due = p.heard, false
	delete(w.retry, p.number)
	for i, id := range ids {
		p.stations[id].settled(ctx, prepared[i])
	}
	w.dropRaw(p, ids, now)
	if w.partitions[p.number] == p {
		w.compact(p, ids, now)
	}
	if passed(w.purged, now, purgeEvery) {
		w.purged = now
		w.purge(ctx, now)
	}
}

// dropRaw takes readings older than the limit out of the archive, a station's at most once a day.
func (w *Worker) dropRaw(p *partition, ids []string, now time.Time) {
	if w.cfg.KeepRaw <= 0 {
		return
	}
	before := minute.Stamp(now.Add(-max(w.cfg.KeepRaw, KeepRawLeast)).UnixMicro()).Day()
	for _, id := range ids {
		s := p.stations[id]
		if s.rawCut >= before {
			continue
		}
		base, err := w.cfg.Archive.DropRaw(p.number, p.base, id, before)
		switch {
		case errors.Is(err, ErrLost):
			w.drop(p.number, "commit", err)
			return
		case err != nil:
			w.fail("commit", "readings that are too old are not dropped; it is tried again", err, "station", id)
			return
		}
		p.base, s.rawCut = base, before
	}
}

// compact makes one file of one station's month, if there is one that is done with. The rest waits for the next commit.
func (w *Worker) compact(p *partition, ids []string, now time.Time) {
	for _, id := range ids {
		s := p.stations[id]
		month := s.compactable(minute.Stamp(now.UnixMicro()))
		if month == "" {
			continue
		}
		base, err := w.cfg.Archive.Compact(p.number, p.base, id, month)
		switch {
		case errors.Is(err, ErrLost):
			w.drop(p.number, "commit", err)
		case err != nil:
			w.fail("commit", "a month is not compacted; it is tried again", err, "station", id, "month", month)
		default:
			p.base = base
			delete(s.months, month)
		}
		return
	}
}

// purgeEvery is how often the journal is cut.
const purgeEvery = time.Hour

// purge forgets what the journal holds behind the oldest committed position, less a day, where every position still holds in the stream. The archive knows the positions of
// partitions that others own.
func (w *Worker) purge(ctx context.Context, now time.Time) {
	st, err := w.cfg.Journal.State(ctx)
	if err != nil {
		w.fail("purge_journal", "the journal cannot be cut behind what is committed", err)
		return
	}
	oldest := ^uint64(0)
	held := map[Position]bool{}
	for n := range partitionCount {
		var at Position
		p := w.partitions[n]
		switch {
		case p != nil && p.base > 0:
			at = p.position
		case p != nil && p.rows == 0:
			at = p.taken
		case p != nil:
			return
		default:
			base, positions, err := w.cfg.Archive.Last(n)
			if err != nil {
				w.fail("read_archive", "the journal is not cut: a partition's position is not known", err, "partition", n)
				return
			}
			if base == 0 && len(w.cfg.Rules.Stations(n)) == 0 {
				continue
			}
			at, _ = journalAndChanges(positions)
		}
		// A position whose number has been given to another message since says nothing of what is committed.
		if !held[at] {
			if reason, err := w.mismatch(ctx, at, st); at.Created == 0 || reason != "" || err != nil {
				return
			}
			held[at] = true
		}
		oldest = min(oldest, at.Seq)
	}
	if oldest == 0 || oldest == ^uint64(0) {
		return
	}
	w.purgeChanges(ctx)
	if err := w.cfg.Journal.Purge(ctx, oldest, now.Add(-purgeBehind)); err != nil {
		w.fail("purge_journal", "the journal cannot be cut behind what is committed", err)
	}
}
