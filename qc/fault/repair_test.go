package fault_test

import (
	"slices"
	"strings"
	"testing"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// Somebody levels a global instrument, or says so. Thirty sunlit minutes after it is known whether it worked, with the closure before and after.
func TestALevellingIsChecked(t *testing.T) {
	const days = historyDays + 5
	b := newBed(t, &plain, 3, days)
	history := b.judge(nil, 0, historyDays, false, b.soundReading).history
	for _, c := range []struct {
		name  string
		hours int // that the fault lasts; the work is noted after three days
		want  fault.CheckOutcome
	}{
		{"levelled", 3 * day, fault.CheckWorked},
		{"not levelled", 5 * day, fault.CheckDidNot},
	} {
		s := b.spell(t, trial{kind: rules.SensorTilted, instrument: "G1", amount: 4, towards: 240, sunHour: 9, hours: c.hours})
		work := s.from + 3*day*60
		at := func(m int) time.Time { return time.Unix(60*(b.first*minute.PerDay+int64(m)), 0).UTC() }
		note := rules.Note{Station: b.station.ID, Instrument: "G1", Kind: rules.Levelling, From: at(work - 20), To: at(work + 5), By: "R. Lund", Made: at(work + 10), Text: "levelled"}
		if err := note.Seal(); err != nil {
			t.Fatal(err)
		}
		sound := b.plan
		b.plan = b.plan.WithNotes([]rules.Note{note})
		got := b.judge(history, historyDays, work/minute.PerDay+1, false, b.reading(&s))
		b.plan = sound
		checks := got.history[len(got.history)-1].Carry.Kinds.Checks
		checks = slices.DeleteFunc(checks, func(c fault.Check) bool { return c.Note == "" })
		if len(checks) != 1 || checks[0].Kind != rules.SensorTilted || checks[0].Note != note.ID || checks[0].Outcome != c.want {
			t.Errorf("%s: %+v", c.name, checks)
			continue
		}
		k := checks[0]
		t.Logf("%s: closure off by %.3f before, %.3f after, %d minutes, known %d minutes after the work", c.name, k.Before, k.After, k.N, k.Done-b.first*minute.PerDay-int64(work))
		if k.Before.Float() < 0.02 || k.Outcome == fault.CheckWorked && k.N != 30 {
			t.Errorf("%s: %+v", c.name, k)
		}
		for _, e := range got.episodes {
			if e.ID == k.Episode && c.want == fault.CheckWorked && !strings.Contains(tell(&e), "after_its_end") {
				t.Errorf("the episode does not say what became of it: %s", tell(&e))
			}
		}
	}
}
