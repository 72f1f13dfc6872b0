package table

import (
	"encoding/json"
	"fmt"
	"strings"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// FaultColumns are the columns of `faults`.
func FaultColumns() []Column { return faultColumns }

var faultColumns = []Column{
	{Name: "id", Description: "stable through all revisions of the episode", Kind: Text, Required: true},
	{Name: "rev", Unit: "1", Description: "how often the episode was changed after it was raised", Kind: Int, Required: true},
	{Name: "station", Kind: Text, Required: true},
	{Name: "instrument", Description: "of the site file, or tracker or logger", Kind: Text, Required: true},
	{Name: "kind", Description: "of the fault catalogue", Kind: Text, Required: true},
	{Name: "also_suspected", Description: "kinds that the evidence cannot yet tell it from, ';' between", Kind: Text},
	{Name: "severity", Description: "act or watch", Kind: Text, Required: true},
	{Name: "from", Description: "first minute that it spoils, UTC", Kind: Time, Required: true},
	{Name: "to", Description: "first minute that is sound again, UTC; null while it lasts", Kind: Time},
	{Name: "raised", Description: "minute at which a run in order crossed the odds, UTC", Kind: Time, Required: true},
	{Name: "confidence", Unit: "1", Description: "0 to 1", Kind: Double},
	{Name: "evidence", Description: "JSON list of name, value, unit", Kind: Text},
	{Name: "advice", Kind: Text},
}

type evidence struct {
	Name  string   `json:"name"`
	Value *float64 `json:"value"`
	Unit  string   `json:"unit"`
}

// FromEpisodes gives episodes as a table.
func FromEpisodes(list []fault.Episode) *Table {
	t := &Table{Columns: faultColumns, Vectors: make([]Vector, len(faultColumns)), Rows: len(list)}
	text := func(name, s string, null bool) {
		v := t.Find(name)
		if null {
			v.Codes = append(v.Codes, NullCode)
			return
		}
		v.Codes = append(v.Codes, v.code(s))
	}
	when := func(name string, minutes int64) {
		v := t.Find(name)
		if minutes == fault.Open {
			v.Times = append(v.Times, NullTime)
			return
		}
		v.Times = append(v.Times, minutes*minute.MicrosPerMinute)
	}
	for i := range list {
		e := &list[i]
		text("id", e.ID, false)
		t.Find("rev").Ints = append(t.Find("rev").Ints, int32(e.Rev))
		text("station", e.Station, false)
		text("instrument", e.Instrument, false)
		text("kind", e.Kind.String(), false)
		also := make([]string, len(e.Also))
		for k, a := range e.Also {
			also[k] = a.String()
		}
		text("also_suspected", strings.Join(also, ";"), len(also) == 0)
		text("severity", e.Severity.String(), false)
		when("from", e.From)
		when("to", e.To)
		when("raised", e.Raised)
		t.Find("confidence").Doubles = append(t.Find("confidence").Doubles, e.Confidence)
		text("evidence", evidenceJSON(e.Evidence), len(e.Evidence) == 0)
		text("advice", e.Advice, e.Advice == "")
	}
	return t
}

func evidenceJSON(list []fault.Evidence) string {
	out := make([]evidence, len(list))
	for i, e := range list {
		out[i] = evidence{Name: e.Name, Unit: e.Unit}
		if v := Round(e.Value, 0); v == v {
			out[i].Value = &list[i].Value
		}
	}
	b, _ := json.Marshal(out)
	return string(b)
}

// ToEpisodes gives the episodes back.
func ToEpisodes(t *Table) ([]fault.Episode, error) {
	list := make([]fault.Episode, t.Rows)
	for i := range list {
		if err := toEpisode(&list[i], t, i); err != nil {
			return nil, fmt.Errorf("row %d: %w", i, err)
		}
	}
	return list, nil
}

func toEpisode(e *fault.Episode, t *Table, i int) error {
	text := func(name string) string {
		if v := t.Find(name); v != nil && v.Codes != nil && v.Codes[i] != NullCode {
			return v.Dict[v.Codes[i]]
		}
		return ""
	}
	when := func(name string) int64 {
		if v := t.Find(name); v != nil && v.Times != nil && v.Times[i] != NullTime {
			return minute.Stamp(v.Times[i]).Minute()
		}
		return fault.Open
	}
	e.ID, e.Station, e.Instrument, e.Advice = text("id"), text("station"), text("instrument"), text("advice")
	if v := t.Find("rev"); v != nil && v.Ints != nil {
		e.Rev = int(v.Ints[i])
	}
	var ok bool
	if e.Kind, ok = rules.ParseFaultKind(text("kind")); !ok {
		return fmt.Errorf("fault kind %q: not in this program's catalogue; use a newer program", text("kind"))
	}
	for _, a := range strings.Split(text("also_suspected"), ";") {
		if k, ok := rules.ParseFaultKind(a); ok {
			e.Also = append(e.Also, k)
		}
	}
	if text("severity") == rules.Act.String() {
		e.Severity = rules.Act
	}
	e.From, e.To, e.Raised = when("from"), when("to"), when("raised")
	if v := t.Find("confidence"); v != nil && v.Doubles != nil {
		e.Confidence = v.Doubles[i]
	}
	if s := text("evidence"); s != "" {
		var list []evidence
		if err := json.Unmarshal([]byte(s), &list); err != nil {
			return fmt.Errorf("evidence: %w", err)
		}
		for _, x := range list {
			ev := fault.Evidence{Name: x.Name, Unit: x.Unit, Value: nan}
			if x.Value != nil {
				ev.Value = *x.Value
			}
			e.Evidence = append(e.Evidence, ev)
		}
	}
	return nil
}
