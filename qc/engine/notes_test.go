package engine

import (
	"testing"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

func noteOn(t testing.TB, day int64, from, to int, change func(n *rules.Note)) rules.Note {
	t.Helper()
	at := time.Unix(86400*day, 0).UTC()
	n := rules.Note{Station: "plain", Kind: rules.Maintenance, From: at.Add(time.Duration(from) * time.Minute), To: at.Add(time.Duration(to) * time.Minute),
		By: "A. Keeper", Made: at.Add(48 * time.Hour)}
	change(&n)
	if err := n.Seal(); err != nil {
		t.Fatal(err)
	}
	return n
}

// Every kind of note does to a verdict what the table says, on its minutes and its instrument and nowhere else; an override holds over
// tests, the later of two over the earlier, and what is absent stays absent.
func TestNotesAndVerdicts(t *testing.T) {
	p := planOf(t, plainText)
	day := dayOf(t, equinox)
	readings := map[int]map[string]float64{}
	for m := 600; m < 660; m++ {
		readings[m] = map[string]float64{"ghi": 900 + float64(m%7), "dni": 5000, "ta_c": 20}
	}
	delete(readings, 630)
	plain := judgedMinutes(t, p, equinox, readings)
	if plain.Series[0].Verdict[610] != rules.Accepted || plain.Series[1].Verdict[610] != rules.Rejected {
		t.Fatalf("without notes: %v and %v", plain.Series[0].Verdict[610], plain.Series[1].Verdict[610])
	}
	set := func(k rules.NoteKind, instrument, verdict string) func(n *rules.Note) {
		return func(n *rules.Note) {
			n.Kind, n.Instrument, n.Verdict, n.Text = k, instrument, verdict, "as seen"
		}
	}
	later := func(n *rules.Note) { set(rules.Override, "B1", "questioned")(n); n.Made = n.Made.Add(time.Hour) }
	for name, x := range map[string]struct {
		changes        []func(n *rules.Note)
		global, direct rules.Verdict
		reasons        rules.NoteSet
	}{
		"maintenance":       {[]func(*rules.Note){set(rules.Maintenance, "G1", "")}, rules.Questioned, rules.Rejected, rules.Maintenance.Of()},
		"cleaning":          {[]func(*rules.Note){set(rules.Cleaning, "G1", "")}, rules.Questioned, rules.Rejected, rules.Cleaning.Of()},
		"levelling":         {[]func(*rules.Note){set(rules.Levelling, "G1", "")}, rules.Questioned, rules.Rejected, rules.Levelling.Of()},
		"exchange":          {[]func(*rules.Note){set(rules.Exchange, "G1", "")}, rules.Rejected, rules.Rejected, rules.Exchange.Of()},
		"remark":            {[]func(*rules.Note){set(rules.Remark, "G1", "")}, rules.Accepted, rules.Rejected, 0},
		"the whole station": {[]func(*rules.Note){set(rules.Maintenance, "", "")}, rules.Questioned, rules.Rejected, rules.Maintenance.Of()},
		"the tracker":       {[]func(*rules.Note){set(rules.Exchange, "tracker", "")}, rules.Accepted, rules.Rejected, 0},
		"override":          {[]func(*rules.Note){set(rules.Override, "B1", "accepted")}, rules.Accepted, rules.Accepted, 0},
		"override, down":    {[]func(*rules.Note){set(rules.Override, "G1", "rejected")}, rules.Rejected, rules.Rejected, rules.Override.Of()},
		"two overrides":     {[]func(*rules.Note){later, set(rules.Override, "B1", "accepted")}, rules.Accepted, rules.Questioned, 0},
		"override over a visit": {[]func(*rules.Note){set(rules.Override, "G1", "accepted"), set(rules.Exchange, "G1", "")}, rules.Accepted, rules.Rejected,
			rules.Override.Of() | rules.Exchange.Of()},
	} {
		t.Run(name, func(t *testing.T) {
			var notes []rules.Note
			for _, c := range x.changes {
				notes = append(notes, noteOn(t, day, 605, 640, c))
			}
			j := judgedMinutes(t, p.WithNotes(notes), equinox, readings)
			g, b := &j.Series[0], &j.Series[1]
			if g.Verdict[610] != x.global || b.Verdict[610] != x.direct || g.Notes[610] != x.reasons {
				t.Errorf("global %v, direct %v, notes %b; want %v, %v, %b", g.Verdict[610], b.Verdict[610], g.Notes[610], x.global, x.direct, x.reasons)
			}
			if g.Verdict[604] != rules.Accepted || g.Verdict[640] != rules.Accepted || g.Notes[604]|g.Notes[640] != 0 {
				t.Error("minutes beside the note are touched")
			}
			if g.Verdict[630] != rules.Absent {
				t.Errorf("what is not there is %v", g.Verdict[630])
			}
			withdrawn := append(notes, notes...)
			for _, n := range notes {
				withdrawn = append(withdrawn, noteOn(t, day, 0, 1, func(w *rules.Note) { w.Kind, w.Withdraws = rules.Withdrawal, n.ID }))
			}
			if canonicalDigest(judgedMinutes(t, p.WithNotes(withdrawn), equinox, readings)) != canonicalDigest(plain) {
				t.Error("withdrawn, the rows are not those of before")
			}
		})
	}
}

// Work at an instrument, or at the station, raises nothing; without the note it does.
func TestMaintenanceSilences(t *testing.T) {
	p := planOf(t, plainText)
	day := dayOf(t, equinox)
	b := minute.Batch{}
	for m := 480; m < 960; m++ {
		r := minute.Reading{At: minute.Stamp(day*minute.PerDay+int64(m)) * minute.MicrosPerMinute}
		if m >= 800 && m < 900 {
			continue // nothing at all: the logger is off
		}
		mu := 0.5
		wave := float64(m % 13)
		add := func(c string, v float64) {
			r.Values = append(r.Values, minute.ChannelValue{Channel: c, Value: minute.Single(v)})
		}
		if m < 600 || m >= 700 {
			add("ghi", 500+wave)
		}
		add("dni", (400+wave)/mu)
		add("dhi", 100+wave/3)
		add("lwd", 300+wave/5)
		b.Append(&r)
	}
	kinds := func(p *Plan) (list []string) {
		judger := NewJudger(p, nil)
		judger.Begin(day)
		judger.Advance(blockOf(p, &b, day))
		judger.End()
		for _, e := range judger.Episodes() {
			if e.From < day*minute.PerDay+955 { // not what is missing after the last reading
				list = append(list, e.Instrument+" "+e.Kind.String())
			}
		}
		return list
	}
	has := func(list []string, what string) bool {
		for _, l := range list {
			if l == what {
				return true
			}
		}
		return false
	}
	open := kinds(p)
	if !has(open, "G1 signal_lost") || !has(open, "logger data_gap") {
		t.Fatalf("without notes: %v", open)
	}
	at := func(from, to int, instrument string) rules.Note {
		return noteOn(t, day, from, to, func(n *rules.Note) { n.Instrument = instrument })
	}
	quiet := kinds(p.WithNotes([]rules.Note{at(595, 705, "G1"), at(795, 905, "logger")}))
	if has(quiet, "G1 signal_lost") || has(quiet, "logger data_gap") {
		t.Errorf("during maintenance: %v", quiet)
	}
	if short := kinds(p.WithNotes([]rules.Note{at(595, 705, "G1"), at(795, 850, "")})); !has(short, "logger data_gap") {
		t.Errorf("the logger stayed away for 50 minutes after the work: %v", short)
	}
	if other := kinds(p.WithNotes([]rules.Note{at(595, 705, "D1")})); !has(other, "G1 signal_lost") {
		t.Errorf("work at another instrument: %v", other)
	}
}

// Cleaning ends what lay on the dome, levelling a tilt, an exchange what was the instrument's own; nothing else does.
func TestWorkEndsFaults(t *testing.T) {
	p := planOf(t, plainText)
	day := dayOf(t, equinox)
	for _, x := range []struct {
		kind       rules.NoteKind
		instrument string
		of         rules.FaultKind
		ends       bool
	}{
		{rules.Cleaning, "G1", rules.DomeSoiled, true}, {rules.Cleaning, "", rules.DomeSoiled, true}, {rules.Cleaning, "D1", rules.DomeSoiled, false},
		{rules.Cleaning, "G1", rules.SensorTilted, false}, {rules.Levelling, "G1", rules.SensorTilted, true},
		{rules.Exchange, "G1", rules.SensitivityWrong, true}, {rules.Maintenance, "G1", rules.DomeSoiled, false},
		{rules.Remark, "G1", rules.DomeSoiled, false},
	} {
		open := fault.Episode{ID: "x", Station: "plain", Instrument: "G1", Kind: x.of, Severity: rules.Act, From: (day - 3) * minute.PerDay,
			Raised: (day - 2) * minute.PerDay, To: fault.Open, Rev: 1}
		h := DaySummary{Station: "plain", Day: day - 1}
		h.Carry.LastRecord = day*minute.PerDay - 1
		h.Carry.Open = []fault.Episode{open}
		b := minute.Batch{}
		for m := range 700 {
			r := minute.Reading{At: minute.Stamp(day*minute.PerDay+int64(m)) * minute.MicrosPerMinute,
				Values: []minute.ChannelValue{{Channel: "ghi", Value: minute.Single(float64(m % 11))}}}
			b.Append(&r)
		}
		with := p.WithNotes([]rules.Note{noteOn(t, day, 100, 120, func(n *rules.Note) { n.Kind, n.Instrument = x.kind, x.instrument })})
		judger := NewJudger(with, []DaySummary{h})
		judger.Begin(day)
		judger.Advance(blockOf(with, &b, day))
		for _, e := range judger.Episodes() {
			if e.ID != "x" {
				continue
			}
			if ended := e.To == day*minute.PerDay+100; ended != x.ends {
				t.Errorf("%s of %q, open %s of G1: to %d", x.kind, x.instrument, x.of, e.To-day*minute.PerDay)
			}
		}
	}
}
