package store

import (
	"cmp"
	"fmt"
	"slices"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store/table"
)

// TableNotes holds what people have said of a station, one file each. What is in it is never taken out: a commit that adds to it writes all
// there was and the new, and the file before goes to superseded/.
const TableNotes = "notes"

// An Owed names days of a station that are to be judged once more: readings or a note have come for them, or a day that they look back on
// has changed. It stands in each record until the days are judged, so that a stop in between loses nothing.
type Owed struct {
	Station string   `json:"station"`
	Reason  string   `json:"reason"`
	Days    []string `json:"days"` // YYYY-MM-DD, ascending
}

// OweDays is an Owed of days since 1970.
func OweDays(station, reason string, days []int64) Owed {
	o := Owed{Station: station, Reason: reason}
	for _, d := range slices.Sorted(slices.Values(days)) {
		o.Days = append(o.Days, dayName(d))
	}
	return o
}

// Each calls f for every day.
func (o *Owed) Each(f func(day int64)) error {
	for _, name := range o.Days {
		day, _, err := span(name)
		if err != nil || isMonth(name) {
			return fmt.Errorf("days owed to %s: %q: not a date", o.Station, name)
		}
		f(day)
	}
	return nil
}

// planNotes adds notes to those of their stations.
func (d *draft) planNotes() error {
	by := map[string][]rules.Note{}
	var order []string
	for _, n := range d.c.Notes {
		if err := checkStation(n.Station); err != nil {
			return err
		}
		if by[n.Station] == nil {
			order = append(order, n.Station)
		}
		by[n.Station] = append(by[n.Station], n)
	}
	for _, station := range order {
		old := d.current(station, TableNotes)
		for _, f := range old {
			d.replace(f)
		}
		d.add(File{Table: TableNotes, Station: station, Sealed: true}, func(f File) ([]byte, File, error) {
			return d.makeNotes(f, old, by[station])
		})
	}
	return nil
}

func (d *draft) makeNotes(f File, old []File, fresh []rules.Note) ([]byte, File, error) {
	all, err := d.a.notesOf(old)
	if err != nil {
		return nil, f, err
	}
	t := table.FromNotes(joinNotes(all, fresh))
	f.Rows = t.Rows
	if t.Meta, err = d.meta(&f, nil); err != nil {
		return nil, f, err
	}
	data, err := table.Encode(t)
	return data, f, err
}

// joinNotes is the notes of both, each once, by the time they were made. Of one given twice the earlier stays.
func joinNotes(a, b []rules.Note) []rules.Note {
	var out []rules.Note
	all := slices.Concat(a, b)
	order := func(x, y rules.Note) int { return cmp.Or(x.Made.Compare(y.Made), cmp.Compare(x.ID, y.ID)) }
	slices.SortStableFunc(all, order)
	seen := map[string]bool{}
	for _, n := range all {
		if !seen[n.ID] {
			seen[n.ID] = true
			out = append(out, n)
		}
	}
	return out
}

func (a *Archive) notesOf(files []File) ([]rules.Note, error) {
	var all []rules.Note
	for _, f := range files {
		t, err := a.readFile(f, nil)
		if err != nil {
			return nil, err
		}
		list, err := table.ToNotes(t)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", f.Path, err)
		}
		all = append(all, list...)
	}
	return joinNotes(all, nil), nil
}

// Notes gives all notes of a station, withdrawn ones and withdrawals among them, by the time they were made; none for a station that the
// archive does not know.
func (a *Archive) Notes(station string) ([]rules.Note, error) {
	if _, ok := a.partitionOf(station); !ok {
		return nil, nil
	}
	var list []rules.Note
	err := a.retry(station, func(p *partition) (err error) {
		list, err = a.notesOf(p.current(station, TableNotes))
		return err
	})
	return list, err
}

// NoteReason is how history says why a day changes for a note.
func NoteReason(n *rules.Note) string { return fmt.Sprintf("note %s: %s by %s", n.ID, n.Kind, n.By) }

// NoteDays lists those of the known days, ascending, whose rows a new note may change: the days that it is about and the first one after it, on
// which what it ends may end. A withdrawal touches those of the note that it takes back, which must be among the others. What later days learn
// of these is found when they are judged.
func NoteDays(n *rules.Note, others []rules.Note, known []int64) []int64 {
	switch n.Kind {
	case rules.Remark:
		return nil
	case rules.Withdrawal:
		for i := range others {
			if others[i].ID == n.Withdraws {
				return NoteDays(&others[i], others, known)
			}
		}
		return nil
	}
	var list []int64
	span := n.Span()
	for _, d := range known {
		switch {
		case (d+1)*minute.PerDay <= span.From:
		case d*minute.PerDay < span.To:
			list = append(list, d)
		case n.Kind != rules.Override:
			return append(list, d)
		default:
			return list
		}
	}
	return list
}
