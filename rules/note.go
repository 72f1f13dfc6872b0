package rules

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"strings"
	"time"
	"unicode/utf8"
)

// A NoteKind is what a note says was done. The list is closed and only grows at its end: the numbers stand in archives.
type NoteKind uint8

const (
	Remark        NoteKind = iota // said for the record; nothing is judged by it
	Maintenance                   // somebody worked at the instrument or the station
	Cleaning                      // domes or windows were cleaned
	Levelling                     // the instrument was levelled
	Exchange                      // the instrument was taken off and another put in its place
	Override                      // a person sets the verdict
	Withdrawal                    // takes back another note
	NoteKindCount = iota
)

var noteKindNames = [NoteKindCount]string{"remark", "maintenance", "cleaning", "levelling", "exchange", "override", "withdrawal"}

func (k NoteKind) String() string {
	if int(k) < NoteKindCount {
		return noteKindNames[k]
	}
	return fmt.Sprintf("note_kind(%d)", uint8(k))
}

// ParseNoteKind gives the kind of a name.
func ParseNoteKind(name string) (NoteKind, bool) {
	for i, n := range noteKindNames {
		if n == name {
			return NoteKind(i), true
		}
	}
	return 0, false
}

// MarshalText writes the kind's name.
func (k NoteKind) MarshalText() ([]byte, error) { return []byte(k.String()), nil }

// UnmarshalText reads a kind's name.
func (k *NoteKind) UnmarshalText(text []byte) error {
	kind, ok := ParseNoteKind(string(text))
	if !ok {
		return fmt.Errorf("note kind %q: there are %s", text, strings.Join(noteKindNames[:], ", "))
	}
	*k = kind
	return nil
}

// A NoteSet is a set of note kinds, one bit a kind.
type NoteSet uint8

// Of is the set with just this kind.
func (k NoteKind) Of() NoteSet { return 1 << k }

// Has says whether the set holds the kind.
func (s NoteSet) Has(k NoteKind) bool { return s>>k&1 == 1 }

// Join writes the names in the list's order with sep between.
func (s NoteSet) Join(sep string) string {
	var list []string
	for k := NoteKind(0); int(k) < NoteKindCount; k++ {
		if s.Has(k) {
			list = append(list, k.String())
		}
	}
	return strings.Join(list, sep)
}

// A Checklist is what was done and found on a visit; an empty answer was not given.
type Checklist struct {
	DomesCleaned string `json:"domes_cleaned,omitempty"` // yes or no
	Level        string `json:"level,omitempty"`         // ok or adjusted
	Desiccant    string `json:"desiccant,omitempty"`     // ok or changed
	CappedZero   string `json:"capped_zero,omitempty"`   // W/m2 with the dome capped
	DomeState    string `json:"dome_state,omitempty"`    // as found: clean, dust, dew, frost, snow, droppings, scratched
}

// A Note is what a person says of an instrument and a time. It is never changed and never erased, only withdrawn by another. Everything in
// it but Made is part of its ID, so that a note given twice is one note.
type Note struct {
	ID         string    `json:"id"`
	Station    string    `json:"station"`
	Instrument string    `json:"instrument,omitempty"` // of the site file, or tracker or logger; empty is the whole station
	Quantity   string    `json:"quantity,omitempty"`   // of an override of the whole station: this quantity only
	Kind       NoteKind  `json:"kind"`
	From       time.Time `json:"from"` // first minute that it is about
	To         time.Time `json:"to"`   // first minute that it is no longer about
	By         string    `json:"by"`
	Text       string    `json:"text,omitempty"`
	Made       time.Time `json:"made"`                // when it was written down
	Verdict    string    `json:"verdict,omitempty"`   // of an override
	Withdraws  string    `json:"withdraws,omitempty"` // ID of the note that a withdrawal takes back
	Checklist  Checklist `json:"checklist,omitzero"`
}

// Bounds of a note.
const (
	NoteTextMax  = 2000 // bytes
	noteNameMax  = 200
	noteDaysMax  = 400
	noteIDLength = 16
)

// Names that a note may give instead of an instrument.
const (
	NoteTracker = "tracker"
	NoteLogger  = "logger"
)

// Seal cuts the note's times to whole minutes, works out its ID and says what is wrong with it. The station and its instruments are held
// against the site by Fits.
func (n *Note) Seal() error {
	n.From, n.To = n.From.UTC().Truncate(time.Minute), ceilMinute(n.To.UTC())
	n.Made = n.Made.UTC().Truncate(time.Second)
	if err := n.check(); err != nil {
		return err
	}
	c := &n.Checklist
	var b canon
	b.line("note 1", n.Station, n.Instrument, n.Quantity, n.Kind.String(), n.From, n.To, n.By, n.Text, n.Verdict, n.Withdraws)
	b.line("checklist", c.DomesCleaned, c.Level, c.Desiccant, c.CappedZero, c.DomeState)
	sum := sha256.Sum256([]byte(b.String()))
	id := hex.EncodeToString(sum[:])[:noteIDLength]
	if n.ID != "" && n.ID != id {
		return fmt.Errorf("note: id %q: its content says %s: it was changed on its way", n.ID, id)
	}
	n.ID = id
	return nil
}

func ceilMinute(t time.Time) time.Time {
	if c := t.Truncate(time.Minute); c.Equal(t) {
		return c
	}
	return t.Truncate(time.Minute).Add(time.Minute)
}

func (n *Note) check() error {
	switch {
	case n.Station == "":
		return errors.New("note: station: none; name it with --station")
	case int(n.Kind) >= NoteKindCount:
		return fmt.Errorf("note: kind %d: not in this program's list; use a newer program", n.Kind)
	case strings.TrimSpace(n.By) == "":
		return fmt.Errorf("note: by: a note of kind %s without an author; say who says so with --by", n.Kind)
	case n.Made.IsZero():
		return errors.New("note: made: no time")
	}
	for _, x := range []struct{ name, text string }{{"station", n.Station}, {"instrument", n.Instrument}, {"by", n.By}} {
		if len(x.text) > noteNameMax || !utf8.ValidString(x.text) || strings.ContainsAny(x.text, "\n\x00") {
			return fmt.Errorf("note: %s: more than %d bytes, or not one line of text", x.name, noteNameMax)
		}
	}
	if len(n.Text) > NoteTextMax || !utf8.ValidString(n.Text) {
		return fmt.Errorf("note: text: %d bytes: give at most %d of UTF-8", len(n.Text), NoteTextMax)
	}
	if n.Kind == Withdrawal {
		if len(n.Withdraws) != noteIDLength {
			return fmt.Errorf("note: withdraws %q: not the id of a note; fluxwarden note --list shows them", n.Withdraws)
		}
		n.From, n.To, n.Instrument, n.Quantity, n.Verdict, n.Checklist = time.Time{}, time.Time{}, "", "", "", Checklist{}
		return nil
	}
	if n.Withdraws != "" {
		return fmt.Errorf("note: withdraws: a note of kind %s withdraws nothing", n.Kind)
	}
	if err := n.checkTimes(); err != nil {
		return err
	}
	if err := n.checkVerdict(); err != nil {
		return err
	}
	return n.Checklist.check()
}

func (n *Note) checkTimes() error {
	const form = "2006-01-02T15:04Z"
	switch {
	case n.From.IsZero() || n.To.IsZero():
		return errors.New("note: from, to: both are needed, such as --from 2026-06-21T09:00Z --to 2026-06-21T09:20Z")
	case !n.From.Before(n.To):
		return fmt.Errorf("note: from %s to %s: the times run backwards or are the same minute; change them round", n.From.Format(form), n.To.Format(form))
	case n.To.Sub(n.From) > noteDaysMax*24*time.Hour:
		return fmt.Errorf("note: from %s to %s: more than %d days; cut it in parts", n.From.Format(form), n.To.Format(form), noteDaysMax)
	case n.From.Year() < 1950 || n.To.Year() > 2100:
		return fmt.Errorf("note: from %s to %s: outside 1950 to 2100", n.From.Format(form), n.To.Format(form))
	}
	return nil
}

func (n *Note) checkVerdict() error {
	if n.Kind != Override {
		if n.Verdict != "" || n.Quantity != "" {
			return fmt.Errorf("note: verdict, quantity: only an override has them, not a note of kind %s", n.Kind)
		}
		return nil
	}
	if v, ok := ParseVerdict(n.Verdict); !ok || v == Absent {
		return fmt.Errorf("note: verdict %q: an override says accepted, questioned or rejected with --verdict", n.Verdict)
	}
	if strings.TrimSpace(n.Text) == "" {
		return errors.New("note: text: an override needs its reason; give it with --text")
	}
	if n.Quantity != "" {
		if _, ok := ParseQuantity(n.Quantity); !ok {
			return fmt.Errorf("note: quantity %q: there are %s", n.Quantity, strings.Join(quantityNames[:], ", "))
		}
	}
	if n.Instrument == "" && n.Quantity == "" {
		return errors.New("note: an override says of what: give --instrument or --quantity")
	}
	return nil
}

func (c *Checklist) check() error {
	for _, x := range []struct {
		name, text string
		may        []string
	}{
		{"domes_cleaned", c.DomesCleaned, []string{"yes", "no"}}, {"level", c.Level, []string{"ok", "adjusted"}},
		{"desiccant", c.Desiccant, []string{"ok", "changed"}},
		{"dome_state", c.DomeState, []string{"clean", "dust", "dew", "frost", "snow", "droppings", "scratched"}},
	} {
		found := x.text == ""
		for _, m := range x.may {
			found = found || x.text == m
		}
		if !found {
			return fmt.Errorf("note: %s %q: say one of %s", x.name, x.text, strings.Join(x.may, ", "))
		}
	}
	if c.CappedZero != "" {
		var v float64
		if _, err := fmt.Sscanf(c.CappedZero, "%g", &v); err != nil || v < -100 || v > 100 {
			return fmt.Errorf("note: capped_zero %q: give the reading with the dome capped in W/m2, -100 to 100", c.CappedZero)
		}
	}
	return nil
}

// Fits says whether the note is about something that the station has.
func (n *Note) Fits(st *Station) error {
	if st == nil {
		return fmt.Errorf("note: station %q: not in the site file", n.Station)
	}
	var have []string
	for i := range st.Instruments {
		in := &st.Instruments[i]
		if n.Instrument == in.ID {
			if n.Quantity != "" && n.Quantity != in.Measures.String() {
				return fmt.Errorf("note: quantity %s: instrument %s measures %s", n.Quantity, in.ID, in.Measures)
			}
			return nil
		}
		have = append(have, in.ID)
	}
	if n.Instrument == "" || n.Instrument == NoteTracker || n.Instrument == NoteLogger {
		return nil
	}
	for i := range st.Weather {
		if n.Instrument == st.Weather[i].Channel {
			return nil
		}
		have = append(have, st.Weather[i].Channel)
	}
	return fmt.Errorf("note: instrument %q: station %s has %s, %s and %s", n.Instrument, st.ID, strings.Join(have, ", "), NoteTracker, NoteLogger)
}
