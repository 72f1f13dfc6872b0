package rules

import (
	"cmp"
	"slices"
)

// A NoteBook is the notes of one station that are in force, as the judge reads them: by their first minute. It depends on the set of notes
// given and not on their order, nor on how often one is given. It is read only and may be shared; nil is an empty one.
type NoteBook struct {
	notes   []Note
	minutes []NoteSpan // of notes[i]
}

// A NoteSpan is minutes counted from 1970, To not included.
type NoteSpan struct{ From, To int64 }

// NewNoteBook reads a station's notes, withdrawn ones and withdrawals among them. Nil is given where none is in force.
func NewNoteBook(all []Note) *NoteBook {
	force := InForce(all)
	b := &NoteBook{}
	for i := range force {
		if n := force[i]; n.Kind != Withdrawal {
			b.notes = append(b.notes, n)
		}
	}
	if len(b.notes) == 0 {
		return nil
	}
	// Of two that override the same minute the later one holds, and it is applied last.
	slices.SortFunc(b.notes, func(x, y Note) int {
		return cmp.Or(x.From.Compare(y.From), x.Made.Compare(y.Made), cmp.Compare(x.ID, y.ID))
	})
	for i := range b.notes {
		b.minutes = append(b.minutes, b.notes[i].Span())
	}
	return b
}

// InForce leaves out repeats and what is withdrawn. A withdrawal can be withdrawn itself: then what it took back is in force again. Of a note
// given twice the one made first stays.
func InForce(all []Note) []Note {
	byID := map[string]Note{}
	against := map[string][]string{}
	for _, n := range all {
		if have, ok := byID[n.ID]; !ok || n.Made.Before(have.Made) {
			byID[n.ID] = n
		}
		if n.Kind == Withdrawal && !slices.Contains(against[n.Withdraws], n.ID) {
			against[n.Withdraws] = append(against[n.Withdraws], n.ID)
		}
	}
	// An ID is a hash over what it withdraws, so that no two can withdraw each other.
	var holds func(id string, depth int) bool
	holds = func(id string, depth int) bool {
		for _, w := range against[id] {
			if depth < len(byID) && holds(w, depth+1) {
				return false
			}
		}
		return true
	}
	var out []Note
	for id, n := range byID {
		if holds(id, 0) {
			out = append(out, n)
		}
	}
	slices.SortFunc(out, func(x, y Note) int { return cmp.Or(x.Made.Compare(y.Made), cmp.Compare(x.ID, y.ID)) })
	return out
}

// Span is the minutes that the note is about.
func (n *Note) Span() NoteSpan { return NoteSpan{n.From.Unix() / 60, n.To.Unix() / 60} }

// Len is how many notes are in force.
func (b *NoteBook) Len() int {
	if b == nil {
		return 0
	}
	return len(b.notes)
}

// Note gives note i and the minutes that it is about. Do not change it.
func (b *NoteBook) Note(i int) (*Note, NoteSpan) { return &b.notes[i], b.minutes[i] }

// Reaching lists the notes about some minute of [from, to), in the order in which they are applied: overrides last, the one made last at
// the end.
func (b *NoteBook) Reaching(from, to int64) []int {
	var list []int
	for i := range b.Len() {
		if b.minutes[i].From < to && b.minutes[i].To > from {
			list = append(list, i)
		}
	}
	slices.SortStableFunc(list, func(i, k int) int {
		x, y := &b.notes[i], &b.notes[k]
		override := func(n *Note) int {
			if n.Kind == Override {
				return 1
			}
			return 0
		}
		return cmp.Or(cmp.Compare(override(x), override(y)), x.Made.Compare(y.Made), cmp.Compare(x.ID, y.ID))
	})
	return list
}

// Concerns says whether the note is about a quantity's instrument: its own, or one that hangs on the tracker or the logger.
func (n *Note) Concerns(instrument string, q Quantity) bool {
	if n.Quantity != "" && n.Quantity != q.String() {
		return false
	}
	switch n.Instrument {
	case "":
		return true
	case NoteTracker:
		return q == Direct || q == Diffuse
	case NoteLogger:
		return int(q) < RadiationCount
	}
	return n.Instrument == instrument
}

// Silences says whether the diagnosis looks away while the note's time lasts: somebody was at work, and what the instrument showed was the
// work.
func (n *Note) Silences() bool {
	switch n.Kind {
	case Maintenance, Cleaning, Levelling, Exchange:
		return true
	}
	return false
}

// Ends says whether the work that the note tells of ends a fault of this kind of an instrument that it concerns: what is left of it has to show
// itself anew.
func (n *Note) Ends(kind FaultKind) bool {
	switch n.Kind {
	case Cleaning:
		return kind == DomeSoiled || kind == DomeWet || kind == DomeSnow || kind == DomeFouled
	case Levelling:
		return kind == SensorTilted
	case Exchange:
		return kind != DataGap && kind != ClockShift && kind != PointingLost && kind != ShadeOff && kind != Shadow
	}
	return false
}
