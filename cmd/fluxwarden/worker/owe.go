package worker

import (
	"context"
	"errors"
	"fmt"
	"maps"
	"slices"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/store"
)

// Days that are to be judged once more are owed. They are paid one at a time beside the readings, and what is not paid yet stands in each
// commit, so that no stop loses it.

// Reasons for which days are owed, besides store.ReasonReadings and notes.
const (
	reasonEpisode = "a fault found later"
	reasonSeal    = "seal" // read once more to be written for good; not kept over a restart, which looks for itself
)

// restAfter is how many times as long as a day's judging took it rests before the next: the readings come first.
const restAfter = 2

// starvedAfter is how long the journal's readings may hold up what is owed.
const starvedAfter = 5 * time.Second

// owe notes that a day is to be judged once more. The first reason stays, but any counts more than a seal.
func (s *station) owe(day int64, reason string) {
	if s.w.cfg.Faulty.NoJudgingAgain && reason != reasonSeal {
		return
	}
	if was, ok := s.again[day]; !ok || was == reasonSeal {
		s.again[day] = reason
	}
}

// owed is what a commit keeps of it. Days without a summary are judged anyway when the station's state is made.
func (s *station) owed() []store.Owed {
	days := map[string][]int64{}
	if s.w.cfg.Faulty.ForgetOwed {
		return nil
	}
	for day, reason := range s.again {
		if reason != reasonSeal && day <= s.lastEnded {
			days[reason] = append(days[reason], day)
		}
	}
	var list []store.Owed
	for _, reason := range slices.Sorted(maps.Keys(days)) {
		list = append(list, store.OweDays(s.id, reason, days[reason]))
	}
	return list
}

// takeOwed takes over what the archive says is owed to the station.
func (s *station) takeOwed() error {
	p := s.w.partitions[s.partition]
	if p == nil {
		return nil
	}
	for _, o := range p.owed[s.id] {
		if err := o.Each(func(day int64) { s.owe(day, o.Reason) }); err != nil {
			return err
		}
	}
	delete(p.owed, s.id)
	return nil
}

// oweTouched owes the days before the current one that an episode reaches now but did not at the last commit, or the other way round.
func (s *station) oweTouched(episodes []fault.Episode) {
	for _, day := range s.touched(episodes) {
		if s.judged[day] == nil {
			s.owe(day, reasonEpisode)
		}
	}
}

// oweSeals owes the days whose time has come, to be judged once more from all that is kept of them and written for good.
func (s *station) oweSeals(now minute.Stamp) {
	for day := range s.sealing {
		if isComplete(day, now) && s.judged[day] == nil {
			s.owe(day, reasonSeal)
		}
	}
}

// pay judges the oldest day that is owed. Days that look back on it are owed in their turn if what they may know of it has changed: those of the
// thirty days after it, and after a longer silence the next one there is.
func (s *station) pay(ctx context.Context, now time.Time) error {
	day := slices.Min(slices.Collect(maps.Keys(s.again)))
	reason := s.again[day]
	delete(s.again, day)
	switch c := s.current; {
	case c != nil && day == c.day:
		if c.idle {
			return nil
		}
		s.w.cfg.Meter.DayJudgedAgain(s.id)
		s.note(day, reason)
		return s.rebuild(ctx)
	case c != nil && day > c.day, c == nil && day > s.lastEnded && reason != store.ReasonReadings:
		return nil // it is yet to be judged
	}
	if err := s.load(day - engine.HistoryDays); err != nil {
		return err
	}
	moved, err := s.closedDayAgain(ctx, day)
	if err != nil {
		return err
	}
	if s.judged[day] == nil && isComplete(day, minute.Stamp(now.UnixMicro())) {
		delete(s.sealing, day) // there is nothing to seal
	}
	s.note(day, reason)
	if !moved {
		return nil
	}
	if reason == reasonSeal { // what was owed has been lost: with the books, for one
		reason = store.ReasonReadings
	}
	next := int64(0)
	for _, d := range s.knownDays() {
		if d > day && d <= day+engine.HistoryDays {
			s.owe(d, reason)
		}
		if d > day && (next == 0 || d < next) {
			next = d
		}
	}
	if next != 0 {
		s.owe(next, reason)
	}
	return nil
}

// note keeps why a day was judged once more, for history.
func (s *station) note(day int64, reason string) {
	if reason != reasonSeal {
		s.paid[day] = reason
	}
}

// knownDays lists the days that have been judged, ascending, as far back as they are loaded.
func (s *station) knownDays() []int64 {
	days := slices.Sorted(maps.Keys(s.summaries))
	if s.current != nil && !s.current.idle {
		days = append(days, s.current.day)
	}
	return days
}

// payAlone pays a day that is owed alone at once: most late readings are of the current day and change no other.
func (s *station) payAlone(ctx context.Context, now time.Time) error {
	for len(s.again) == 1 {
		if err := s.pay(ctx, now); err != nil {
			return err
		}
	}
	return nil
}

// payOne judges one owed day of one station if it is time for it. When a partition owes no more it commits soon.
func (w *Worker) payOne(ctx context.Context, now time.Time) bool {
	if w.cursor == nil || now.Before(w.payAt) && w.payAt.Sub(now) < time.Minute || !w.caughtUp && !passed(w.paid, now, starvedAfter) {
		return false
	}
	for n := range partitionCount {
		p := w.partitions[n]
		if p == nil {
			continue
		}
		for _, id := range slices.Sorted(maps.Keys(p.stations)) {
			s := p.stations[id]
			if len(s.again) == 0 {
				continue
			}
			if err := s.pay(ctx, now); err != nil {
				w.drop(n, "read_archive", fmt.Errorf("station %s: %w", id, err))
				return false
			}
			w.paid = now
			w.payAt = w.cfg.Clock.Now().Add(restAfter * max(0, w.cfg.Clock.Now().Sub(now)))
			if p.owes() == 0 {
				p.dirty, p.due = true, true
			}
			return true
		}
	}
	return false
}

// owes counts the days that are to be judged once more.
func (p *partition) owes() (n int) {
	for _, s := range p.stations {
		n += len(s.again)
	}
	return n
}

// Owes counts the station-days that are to be judged once more.
func (w *Worker) Owes() (n int) {
	for _, p := range w.partitions {
		n += p.owes()
	}
	return n
}

// listen reads the stream of notes.
func (w *Worker) listen(ctx context.Context) {
	if len(w.partitions) == 0 {
		return
	}
	st, err := w.cfg.Changes.State(ctx)
	if err != nil {
		w.fail("read_changes", "notes cannot be read; it is tried again", err)
		return
	}
	from := st.Last + 1
	for _, n := range slices.Sorted(maps.Keys(w.partitions)) {
		p := w.partitions[n]
		if err := w.lookAtChanges(ctx, p, st); err != nil {
			w.fail("read_changes", "notes cannot be read; it is tried again", err, "partition", n)
			return
		}
		from = min(from, p.heard.Seq+1)
	}
	if from > st.Last {
		return
	}
	list, err := w.cfg.Changes.Read(ctx, from)
	if err != nil {
		w.fail("read_changes", "notes cannot be read; it is tried again", err)
		return
	}
	for i := range list {
		if w.hear(ctx, &list[i], st) {
			w.listened = time.Time{} // there may be more
		}
	}
}

// lookAtChanges holds a position against the stream. Where it does not hold all notes of the stream are read again: one that is known already
// changes nothing.
func (w *Worker) lookAtChanges(ctx context.Context, p *partition, st StreamState) error {
	anew := Position{Stream: ChangesStream, Created: st.Created, Seq: st.First - 1}
	switch {
	case p.heard.Created != st.Created || p.heard.Seq > st.Last:
		p.heard = anew
	case !p.looked && p.heard.Seq >= st.First && p.heard.Stamp != 0:
		stamp, found, err := w.cfg.Changes.StampOf(ctx, p.heard.Seq)
		if err != nil {
			return err
		}
		if found && stamp != p.heard.Stamp {
			p.heard = anew
		}
	}
	p.looked = true
	p.heard.Seq = max(p.heard.Seq, st.First-1)
	return nil
}

// hear takes one note to its station, and says that it was read.
func (w *Worker) hear(ctx context.Context, c *Change, st StreamState) bool {
	p := w.partitions[c.Partition]
	if p != nil && c.Seq > p.heard.Seq {
		if err := w.takeNote(ctx, p, c); err != nil {
			w.drop(p.number, "read_archive", err)
			return false
		}
	}
	for _, p := range w.partitions {
		if c.Seq > p.heard.Seq && p.heard.Created == st.Created {
			p.heard.Seq, p.heard.Stamp = c.Seq, c.Stamp
		}
	}
	return true
}

// takeNote gives a note to its station, or sets it aside with the reason.
func (w *Worker) takeNote(ctx context.Context, p *partition, c *Change) error {
	n, err := c.Note, c.Bad
	if err == nil {
		err = n.Seal()
	}
	if err == nil {
		err = fits(w.cfg.Rules, &n, minute.Stamp(w.cfg.Clock.Now().UnixMicro()).Day())
	}
	if err != nil {
		w.setAside(ctx, ReasonNote, n.Station, nil, c.Payload, err.Error())
		return nil
	}
	s, err := w.station(ctx, p, n.Station)
	if err != nil {
		return err
	}
	if err := s.takeNote(&n); err != nil {
		return err
	}
	w.cfg.Meter.Noted(1)
	p.dirty, p.due = true, true
	return nil
}

var errNoStation = errors.New("not declared in the site file")

// changesBytesMax is how large the stream of notes grows before what every partition has committed is forgotten there.
const changesBytesMax = 16 << 20

// purgeChanges forgets the notes that all partitions have in the archive.
func (w *Worker) purgeChanges(ctx context.Context) {
	if w.cfg.Changes == nil {
		return
	}
	st, err := w.cfg.Changes.State(ctx)
	if err != nil || st.Bytes < changesBytesMax {
		return
	}
	oldest := st.Last
	for n := range partitionCount {
		base, positions, err := w.cfg.Archive.Last(n)
		_, at := journalAndChanges(positions)
		switch {
		case err != nil:
			return
		case base == 0 && len(w.cfg.Rules.Stations(n)) == 0:
			continue
		case at.Created != st.Created:
			return
		}
		oldest = min(oldest, at.Seq)
	}
	if err := w.cfg.Changes.Purge(ctx, oldest); err != nil {
		w.fail("purge_journal", "the stream of notes cannot be cut behind what is committed", err)
	}
}
