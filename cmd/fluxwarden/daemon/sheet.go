package daemon

import (
	"cmp"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"slices"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/rules"
)

// sheetLines is how many lines a station has on the morning sheet at most.
const sheetLines = 5

// A Sheet is the morning sheet: what is wrong at each station, the worst first.
type Sheet struct {
	Until    string         `json:"until"`    // last minute that is known, RFC 3339; empty where there is none
	Stations []SheetStation `json:"stations"` // only those with something to say
	Asked    int            `json:"asked"`    // stations looked at
}

// A SheetStation is one station's part of it.
type SheetStation struct {
	Station string      `json:"station"`
	Lines   []SheetLine `json:"lines"`
	More    int         `json:"more,omitempty"` // that did not find room
}

// A SheetLine is one fault, or what became of one.
type SheetLine struct {
	Episode    string     `json:"episode"`
	Instrument string     `json:"instrument"`
	Kind       string     `json:"kind"`
	Severity   string     `json:"severity"`
	From       time.Time  `json:"from"`
	To         *time.Time `json:"to"`
	Size       string     `json:"size"` // how many degrees, percent or W/m2
	What       string     `json:"what"` // the fault in words, its beginning and size with it
	Do         string     `json:"do"`
	Take       string     `json:"take"`
	Caution    string     `json:"caution,omitempty"`
	Repair     string     `json:"repair,omitempty"` // worked, did not, not seen yet
	RepairSaid string     `json:"repair_said,omitempty"`
	badness    float64
}

// sheetEndedMinutes is how long a fault that is over, and was looked at again, stays on the sheet.
const sheetEndedMinutes = 1440

// SheetStationOf makes a station's part from its episodes and from the repairs that are looked at, as of a minute; false where there is nothing
// to say.
func SheetStationOf(station string, episodes []fault.Episode, checks []fault.Check, at int64) (SheetStation, bool) {
	s := SheetStation{Station: station}
	for i := range episodes {
		e := &episodes[i]
		check := checkOf(e, checks)
		if e.To != fault.Open && (check == nil || at-e.To > sheetEndedMinutes) {
			continue
		}
		s.Lines = append(s.Lines, sheetLineOf(e, check, at))
	}
	slices.SortStableFunc(s.Lines, func(a, b SheetLine) int { return cmp.Or(cmp.Compare(b.badness, a.badness), a.From.Compare(b.From)) })
	if len(s.Lines) > sheetLines {
		s.More = len(s.Lines) - sheetLines
		s.Lines = s.Lines[:sheetLines]
	}
	return s, len(s.Lines) > 0
}

func checkOf(e *fault.Episode, checks []fault.Check) *fault.Check {
	for i := range checks {
		if checks[i].Episode == e.ID {
			return &checks[i]
		}
	}
	return e.Check() // of a day that is not summed up yet
}

func sheetLineOf(e *fault.Episode, check *fault.Check, at int64) SheetLine {
	entry := e.Kind.Entry()
	f := NewFindingLine(e)
	l := SheetLine{Episode: e.ID, Instrument: e.Instrument, Kind: f.Kind, Severity: f.Severity, From: f.From, To: f.To, Size: e.Size(), What: e.What(at),
		Do: entry.Work(), Take: rules.PageOf(e.Kind).Take, Caution: entry.Caution(), badness: fault.Badness(e)}
	if check != nil {
		l.Repair, l.RepairSaid = check.Outcome.String(), check.Say()
		if check.Outcome == fault.CheckWorked {
			l.Do, l.Take, l.Caution = "", "", ""
		}
	}
	if e.To != fault.Open && (check == nil || check.Outcome != fault.CheckDidNot) {
		l.badness -= 1000 // it is over
	}
	return l
}

// Write prints the sheet for a person. Where all is well it is one line.
func (s *Sheet) Write(w io.Writer) error {
	until := s.Until
	if until == "" {
		until = "no minute yet"
	}
	if len(s.Stations) == 0 {
		_, err := fmt.Fprintf(w, "all is well: nothing open at %d %s, %s\n", s.Asked, plural(s.Asked, "station"), until)
		return err
	}
	out := fmt.Sprintf("%d of %d stations, %s\n", len(s.Stations), s.Asked, until)
	for _, st := range s.Stations {
		out += st.Station + "\n"
		for i := range st.Lines {
			out += "  " + st.Lines[i].text() + "\n"
		}
		if st.More > 0 {
			out += fmt.Sprintf("  and %d more: fluxwarden faults lists them\n", st.More)
		}
	}
	_, err := io.WriteString(w, out)
	return err
}

func (l *SheetLine) text() string {
	s := l.Instrument + ": " + l.What + "."
	if l.RepairSaid != "" {
		s += " Repair " + l.RepairSaid + "."
	}
	if l.Do != "" {
		s += " " + l.Do + " Take " + l.Take
	}
	if l.Caution != "" {
		s += " " + l.Caution
	}
	return s
}

func plural(n int, word string) string {
	if n == 1 {
		return word
	}
	return word + "s"
}

// morningSheet answers with the morning sheet of what is open now, and of what is over since the day began.
func (d *Daemon) morningSheet(w http.ResponseWriter, _ *http.Request) {
	site := d.rules.newest()
	now := d.config.Clock.Now().UTC()
	s := Sheet{Until: now.Format(time.RFC3339), Stations: []SheetStation{}, Asked: len(site.Stations)}
	for i := range site.Stations {
		id := site.Stations[i].ID
		if part, ok := SheetStationOf(id, d.hub.episodes(id), nil, now.Unix()/60); ok {
			s.Stations = append(s.Stations, part)
		}
	}
	w.Header().Set("Content-Type", "application/json")
	if err := json.NewEncoder(w).Encode(&s); err != nil {
		d.metrics.Failed("http")
	}
}
