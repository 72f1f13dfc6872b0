package table

import (
	"fmt"
	"time"

	"fluxwarden/rules"
)

// NoteColumns are the columns of `notes`, only ever added to at the end.
func NoteColumns() []Column { return noteColumns }

var noteColumns = []Column{
	{Name: "id", Description: "a hash over what the note says", Kind: Text, Required: true},
	{Name: "station", Kind: Text, Required: true},
	{Name: "instrument", Description: "of the site file, or tracker or logger; null is the whole station", Kind: Text},
	{Name: "quantity", Description: "of an override of the whole station", Kind: Text},
	{Name: "kind", Description: "remark, maintenance, cleaning, levelling, exchange, override or withdrawal", Kind: Text, Required: true},
	{Name: "from", Description: "first minute that it is about, UTC", Kind: Time},
	{Name: "to", Description: "first minute that it is no longer about, UTC", Kind: Time},
	{Name: "by", Description: "who says so", Kind: Text, Required: true},
	{Name: "text", Kind: Text},
	{Name: "made", Description: "when it was written down, UTC", Kind: Time, Required: true},
	{Name: "verdict", Description: "of an override: accepted, questioned or rejected", Kind: Text},
	{Name: "withdraws", Description: "id of the note that a withdrawal takes back", Kind: Text},
	{Name: "in_force", Description: "yes, or no where another note in force has withdrawn it", Kind: Text, Required: true},
	{Name: "domes_cleaned", Description: "checklist: yes or no", Kind: Text},
	{Name: "level", Description: "checklist: ok or adjusted", Kind: Text},
	{Name: "desiccant", Description: "checklist: ok or changed", Kind: Text},
	{Name: "capped_zero", Unit: "W m-2", Description: "checklist: reading with the dome capped", Kind: Text},
	{Name: "dome_state", Description: "checklist: as found", Kind: Text},
}

// noteTexts are the texts of a note by their columns.
func noteTexts(n *rules.Note) map[string]*string {
	c := &n.Checklist
	return map[string]*string{"id": &n.ID, "station": &n.Station, "instrument": &n.Instrument, "quantity": &n.Quantity, "by": &n.By, "text": &n.Text,
		"verdict": &n.Verdict, "withdraws": &n.Withdraws, "domes_cleaned": &c.DomesCleaned, "level": &c.Level, "desiccant": &c.Desiccant,
		"capped_zero": &c.CappedZero, "dome_state": &c.DomeState}
}

func noteTimes(n *rules.Note) map[string]*time.Time {
	return map[string]*time.Time{"from": &n.From, "to": &n.To, "made": &n.Made}
}

// FromNotes gives all notes of a station as a table.
func FromNotes(list []rules.Note) *Table {
	t := &Table{Columns: noteColumns, Vectors: make([]Vector, len(noteColumns)), Rows: len(list)}
	force := map[string]bool{}
	for _, n := range rules.InForce(list) {
		force[n.ID] = true
	}
	for i := range list {
		n := list[i]
		texts, times := noteTexts(&n), noteTimes(&n)
		kind, inForce := n.Kind.String(), "no"
		if force[n.ID] {
			inForce = "yes"
		}
		texts["kind"], texts["in_force"] = &kind, &inForce
		for k := range noteColumns {
			c, v := &noteColumns[k], &t.Vectors[k]
			switch c.Kind {
			case Time:
				at := int64(NullTime)
				if x := *times[c.Name]; !x.IsZero() {
					at = x.UnixMicro()
				}
				v.Times = append(v.Times, at)
			default:
				if x := *texts[c.Name]; x != "" {
					v.Codes = append(v.Codes, v.code(x))
				} else {
					v.Codes = append(v.Codes, NullCode)
				}
			}
		}
	}
	return t
}

// ToNotes gives the notes back.
func ToNotes(t *Table) ([]rules.Note, error) {
	list := make([]rules.Note, t.Rows)
	for i := range list {
		n := &list[i]
		kind := ""
		texts := noteTexts(n)
		texts["kind"] = &kind
		for name, to := range texts {
			if v := t.Find(name); v != nil && v.Codes != nil && v.Codes[i] != NullCode {
				*to = v.Dict[v.Codes[i]]
			}
		}
		for name, to := range noteTimes(n) {
			if v := t.Find(name); v != nil && v.Times != nil && v.Times[i] != NullTime {
				*to = time.UnixMicro(v.Times[i]).UTC()
			}
		}
		if err := n.Kind.UnmarshalText([]byte(kind)); err != nil {
			return nil, fmt.Errorf("row %d: %w; use a newer program", i, err)
		}
		if err := n.Seal(); err != nil {
			return nil, fmt.Errorf("row %d: %w", i, err)
		}
	}
	return list, nil
}
