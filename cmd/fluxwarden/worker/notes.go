package worker

import (
	"fmt"
	"slices"

	"fluxwarden/rules"
	"fluxwarden/store"
)

// fits says whether a note is about something that the rules of today know.
func fits(r Rules, n *rules.Note, today int64) error {
	plan := r.PlanFor(n.Station, today)
	if plan == nil {
		return fmt.Errorf("station %s: %w", n.Station, errNoStation)
	}
	err := n.Fits(plan.Station)
	if err != nil && !n.From.IsZero() { // the instrument may have gone since
		if then := r.PlanFor(n.Station, n.Span().From/1440); then != nil && n.Fits(then.Station) == nil {
			return nil
		}
	}
	return err
}

// takeNote adds a note, unless it is known, and owes the days that it may change. The plans of days yet to be judged have it from now on.
func (s *station) takeNote(n *rules.Note) error {
	for i := range s.notes {
		if s.notes[i].ID != n.ID {
			continue
		}
		if !n.Made.Before(s.notes[i].Made) {
			return nil
		}
		s.notes = append(s.notes[:i:i], s.notes[i+1:]...) // the one made first stays, whichever came first
		break
	}
	s.notes = append(s.notes, *n)
	s.newNotes = append(s.newNotes, *n)
	clear(s.plans)
	if about := s.about(n); !about.From.IsZero() {
		if err := s.load(about.Span().From/1440 - 1); err != nil {
			return err
		}
	}
	if s.w.cfg.Faulty.NotesAhead {
		return nil
	}
	for _, day := range store.NoteDays(n, s.notes, s.knownDays()) {
		s.owe(day, store.NoteReason(n))
	}
	return nil
}

// about is the note that a withdrawal takes back, or gives back by taking back a withdrawal; any other note is about itself.
func (s *station) about(n *rules.Note) *rules.Note {
	for range s.notes {
		if n.Kind != rules.Withdrawal {
			break
		}
		k := slices.IndexFunc(s.notes, func(x rules.Note) bool { return x.ID == n.Withdraws })
		if k < 0 {
			break
		}
		n = &s.notes[k]
	}
	return n
}
