package rules

import (
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"
	"time"
)

func goodNote() Note {
	at := time.Date(2026, 6, 21, 9, 0, 0, 0, time.UTC)
	return Note{Station: "northmoor", Instrument: "G1", Kind: Maintenance, From: at, To: at.Add(20 * time.Minute), By: "A. Keeper", Made: at.Add(time.Hour)}
}

func sealed(t testing.TB, change func(n *Note)) Note {
	t.Helper()
	n := goodNote()
	change(&n)
	if err := n.Seal(); err != nil {
		t.Fatal(err)
	}
	return n
}

func TestWhatIsWrongWithANoteIsSaid(t *testing.T) {
	for name, x := range map[string]struct {
		change func(n *Note)
		says   string
	}{
		"times backwards":      {func(n *Note) { n.From, n.To = n.To, n.From }, "run backwards"},
		"no time at all":       {func(n *Note) { n.To = n.From }, "run backwards or are the same minute"},
		"no author":            {func(n *Note) { n.By = " " }, "--by"},
		"override, no author":  {func(n *Note) { n.Kind, n.Verdict, n.Text, n.By = Override, "accepted", "x", "" }, "override without an author"},
		"override, no reason":  {func(n *Note) { n.Kind, n.Verdict = Override, "accepted" }, "reason"},
		"override, no verdict": {func(n *Note) { n.Kind, n.Text = Override, "x" }, "--verdict"},
		"override to absent":   {func(n *Note) { n.Kind, n.Text, n.Verdict = Override, "x", "absent" }, "--verdict"},
		"a verdict elsewhere":  {func(n *Note) { n.Verdict = "accepted" }, "only an override"},
		"too long":             {func(n *Note) { n.To = n.From.AddDate(2, 0, 0) }, "days"},
		"withdraws nothing":    {func(n *Note) { n.Kind = Withdrawal }, "not the id"},
		"level":                {func(n *Note) { n.Checklist.Level = "fine" }, "ok, adjusted"},
		"capped zero":          {func(n *Note) { n.Checklist.CappedZero = "none" }, "capped_zero"},
		"changed on its way":   {func(n *Note) { n.ID = "0123456789abcdef" }, "changed on its way"},
		"a text without end":   {func(n *Note) { n.Text = strings.Repeat("x", NoteTextMax+1) }, "text"},
	} {
		n := goodNote()
		x.change(&n)
		if err := n.Seal(); err == nil || !strings.Contains(err.Error(), x.says) {
			t.Errorf("%s: %v, want something with %q", name, err, x.says)
		}
	}
	a, b := sealed(t, func(*Note) {}), sealed(t, func(n *Note) { n.Made = n.Made.Add(time.Hour); n.From = n.From.Add(30 * time.Second) })
	if a.ID != b.ID {
		t.Error("the same note given again later has another id")
	}
	if c := sealed(t, func(n *Note) { n.Text = "x" }); c.ID == a.ID {
		t.Error("another text has the same id")
	}
}

func TestANoteFitsItsStation(t *testing.T) {
	st := &Station{ID: "northmoor", Instruments: []Instrument{{ID: "G1", Measures: Global}}, Weather: []WeatherInput{{Channel: "ta_c"}}}
	for instrument, says := range map[string]string{"G1": "", "": "", NoteTracker: "", NoteLogger: "", "ta_c": "", "G2": "has G1, ta_c, tracker and logger"} {
		n := sealed(t, func(n *Note) { n.Instrument = instrument })
		err := n.Fits(st)
		if (says == "") != (err == nil) || err != nil && !strings.Contains(err.Error(), says) {
			t.Errorf("instrument %q: %v, want %q", instrument, err, says)
		}
	}
	n := goodNote()
	if err := n.Fits(nil); err == nil || !strings.Contains(err.Error(), `station "northmoor"`) {
		t.Errorf("unknown station: %v", err)
	}
}

// Which notes are in force does not depend on their order, nor on how often one was given; a withdrawal that is withdrawn itself takes back
// nothing.
func TestNotesInForceAreOfTheSet(t *testing.T) {
	a := sealed(t, func(n *Note) { n.Text = "a" })
	b := sealed(t, func(n *Note) { n.Text = "b" })
	takesBackA := sealed(t, func(n *Note) { n.Kind, n.Withdraws, n.Text = Withdrawal, a.ID, "wrong day" })
	takesBackB := sealed(t, func(n *Note) { n.Kind, n.Withdraws, n.Text = Withdrawal, b.ID, "wrong day" })
	andNot := sealed(t, func(n *Note) { n.Kind, n.Withdraws, n.Text = Withdrawal, takesBackB.ID, "right after all" })
	again := a
	again.Made = again.Made.Add(5 * time.Hour)
	all := []Note{a, b, takesBackA, takesBackB, andNot, again}
	want := NewNoteBook(all)
	if want.Len() != 1 || want.notes[0].ID != b.ID {
		t.Fatalf("in force: %+v, want b alone", want)
	}
	for seed := range uint64(20) {
		rand.New(rand.NewPCG(seed, 1)).Shuffle(len(all), func(i, k int) { all[i], all[k] = all[k], all[i] })
		if got := NewNoteBook(all); !reflect.DeepEqual(got, want) {
			t.Fatalf("in another order: %+v, want %+v", got, want)
		}
	}
	if NewNoteBook([]Note{a, takesBackA}) != nil || (*NoteBook)(nil).Reaching(0, 1<<40) != nil {
		t.Error("a book without notes is not empty")
	}
}
