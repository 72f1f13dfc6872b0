package synth

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// sunnyHour finds a time with a strong beam from which on the sky stays open for an hour.
func sunnyHour(t *testing.T, s *Station) minute.Stamp {
	t.Helper()
	from := stamp(t, "2026-06-01T00:30:00Z")
	for k := range 24 * 60 {
		at := s.Next(from + minute.Stamp(k)*30*minute.MicrosPerMinute)
		fine := true
		for m := range 7 {
			n := s.skyAt(at + minute.Stamp(m)*10*minute.MicrosPerMinute)
			fine = fine && n.direct > 400 && n.mu > 0.3
		}
		if fine {
			return at
		}
	}
	t.Fatal("no sunny hour in thirty days")
	return 0
}

func valuesOf(r *minute.Reading) map[string]string {
	out := map[string]string{}
	for _, v := range r.Values {
		out[v.Channel] = fmt.Sprint(v.Value)
	}
	return out
}

// Each kind, at everybody who can have it: before and after its time the records are those of the sound station; within, only
// the channels that it reaches differ, and at least one of them does.
func TestFaultsChangeWhatTheyShould(t *testing.T) {
	for place := range 2 {
		for kind := range rules.FaultKind(rules.FaultKindCount) {
			for _, who := range stationOf(t, place, 11).CanHave(kind) {
				t.Run(fmt.Sprintf("%s/%s/%s", places[place].id, kind, who), func(t *testing.T) {
					s := stationOf(t, place, 11)
					from := sunnyHour(t, s)
					f := Fault{Kind: kind, Instrument: who, From: from, To: from + 30*minute.MicrosPerMinute}
					switch kind {
					case rules.RangeClipped:
						f.Amount = 50 // so that each instrument gets there
					case rules.PointingLost:
						f.Amount = 6 // a tracker that stands still takes longer than this
					case rules.SensorTilted:
						f.TowardsDeg = 200
					}
					if err := s.AddFault(f); err != nil {
						t.Fatal(err)
					}
					checkReach(t, s, f)
				})
			}
		}
	}
}

func checkReach(t *testing.T, s *Station, f Fault) {
	t.Helper()
	reach, changed := s.Channels(f), map[string]bool{}
	for start := f.From - 10*minute.MicrosPerMinute; start < f.To+10*minute.MicrosPerMinute; start += s.interval {
		at := start
		if s.rules.Time.LabelEnd {
			at += s.interval
		}
		with, without := s.Reading(at), s.Sound(at)
		faulty, sound := valuesOf(&with), valuesOf(&without)
		for c, v := range sound {
			if faulty[c] == v {
				continue
			}
			if start < f.From || start >= f.To {
				t.Fatalf("%v: %s is %s, sound %s, outside the fault's time", start, c, faulty[c], v)
			}
			if !slices.Contains(reach, c) {
				t.Fatalf("%v: %s is %s, sound %s: the fault should reach %v only", start, c, faulty[c], v, reach)
			}
			changed[c] = true
		}
	}
	if len(changed) == 0 {
		t.Errorf("nothing changed of %v", reach)
	}
}

// What single kinds do, in numbers, at the moor in the sun.
func TestFaultAmounts(t *testing.T) {
	type pair struct{ with, without float64 }
	near := func(got, want, tolerance float64) string {
		if math.Abs(got-want) > tolerance || math.IsNaN(got) {
			return fmt.Sprintf("%.2f, want %.2f within %.2f", got, want, tolerance)
		}
		return ""
	}
	for _, c := range []struct {
		fault Fault
		see   string // whose value is looked at
		check func(p pair) string
	}{
		{Fault{Kind: rules.SignalLost, Instrument: "P1"}, "P1", func(p pair) string {
			if !math.IsNaN(p.with) {
				return "a value where the channel is out"
			}
			return ""
		}},
		{Fault{Kind: rules.SignalLost, Instrument: "P1", Amount: 0.3}, "P1", func(p pair) string { return near(p.with, 0, 1.2) }},
		{Fault{Kind: rules.PolarityReversed, Instrument: "G1"}, "G1", func(p pair) string { return near(p.with, -p.without, 0.1) }},
		{Fault{Kind: rules.UnitSlip, Instrument: "G1", Amount: 0.1}, "G1", func(p pair) string { return near(p.with, p.without/10, 0.1) }},
		{Fault{Kind: rules.RangeClipped, Instrument: "G1", Amount: 300}, "G1", func(p pair) string { return near(p.with, math.Min(300, p.without), 3) }},
		{Fault{Kind: rules.SensitivityWrong, Instrument: "P1", Amount: 0.06}, "P1", func(p pair) string { return near(p.with, 1.06*p.without, 0.5) }},
		{Fault{Kind: rules.ZeroOffset, Instrument: "D1", Amount: -14}, "D1", func(p pair) string { return near(p.with, p.without-14, 0.1) }},
		{Fault{Kind: rules.DomeFouled, Instrument: "P1", Amount: 0.25}, "P1", func(p pair) string { return near(p.with, 0.75*p.without, 0.5) }},
		{Fault{Kind: rules.DomeSoiled, Instrument: "P1", Amount: 0.2}, "P1", func(p pair) string { return near(p.with, 0.9*p.without, 0.02*p.without) }},
		{Fault{Kind: rules.ThermistorBad, Instrument: "L1", Amount: 6}, "L1", func(p pair) string { return near(p.with-p.without, 127, 8) }}, // 6 K (k2 + k3) 4 sigma T^3: 3.898 times 5.42 W/m2 for one kelvin at 288 K
		{Fault{Kind: rules.Shadow, Instrument: "P1", Amount: 20}, "P1", func(p pair) string { return near(p.with, 0, 0.03*p.without) }},
	} {
		name := c.fault.Kind.String()
		t.Run(name, func(t *testing.T) {
			s := stationOf(t, 0, 11)
			from := sunnyHour(t, s)
			c.fault.From, c.fault.To = from, from+60*minute.MicrosPerMinute
			if err := s.AddFault(c.fault); err != nil {
				t.Fatal(err)
			}
			at := from + 31*minute.MicrosPerMinute
			with, without := s.Reading(at), s.Sound(at)
			p := pair{measured(s, &with, c.see), measured(s, &without, c.see)}
			if wrong := c.check(p); wrong != "" {
				t.Errorf("%s (sound %.1f)", wrong, p.without)
			}
		})
	}
}

// A shade that is off, and a tracker that stands still, bring diffuse up to global; a stopped tracker loses the beam.
func TestTrackerFaultsMeetGlobal(t *testing.T) {
	for _, f := range []Fault{{Kind: rules.ShadeOff, Instrument: "D1"}, {Kind: rules.PointingLost}} {
		s := stationOf(t, 0, 11)
		from := sunnyHour(t, s)
		f.From, f.To = from-40*minute.MicrosPerMinute, from+60*minute.MicrosPerMinute
		if err := s.AddFault(f); err != nil {
			t.Fatal(err)
		}
		r := s.Reading(from + 50*minute.MicrosPerMinute)
		if g, d := measured(s, &r, "G1"), measured(s, &r, "D1"); math.Abs(g/d-1) > 0.02 {
			t.Errorf("%s: global %.1f, diffuse %.1f", f.Kind, g, d)
		}
		if p := measured(s, &r, "P1"); f.Kind == rules.PointingLost && p > 5 {
			t.Errorf("%s: direct %.1f after ninety minutes of standing still", f.Kind, p)
		}
	}
}

func TestFrozenStandsStillAndSwapSwaps(t *testing.T) {
	s := stationOf(t, 1, 4)
	from := sunnyHour(t, s)
	for _, f := range []Fault{
		{Kind: rules.SignalFrozen, Instrument: "P1", From: from, To: from + 30*minute.MicrosPerMinute},
		{Kind: rules.ChannelsSwapped, Instrument: "G1", With: "D1", From: from, To: from + 30*minute.MicrosPerMinute},
	} {
		if err := s.AddFault(f); err != nil {
			t.Fatal(err)
		}
	}
	first := s.Reading(from)
	for k := range minute.Stamp(20) {
		at := from + k*minute.MicrosPerMinute
		r, sound := s.Reading(at), s.Sound(at)
		if got, want := channel(&r, "dni"), channel(&first, "dni"); got != want {
			t.Fatalf("minute %d: %v, frozen at %v", k, got, want)
		}
		if got, want := channel(&r, "ghi"), channel(&sound, "dhi"); got != want {
			t.Fatalf("minute %d: global's input says %v, diffuse would say %v", k, got, want)
		}
	}
}

// A logger whose clock is ahead by ten minutes says under a stamp what was ten minutes before.
func TestClockShift(t *testing.T) {
	s := stationOf(t, 0, 4)
	from := sunnyHour(t, s)
	if err := s.AddFault(Fault{Kind: rules.ClockShift, From: from, To: from + 30*minute.MicrosPerMinute, Amount: 600}); err != nil {
		t.Fatal(err)
	}
	at := from + 20*minute.MicrosPerMinute
	got, want := s.Reading(at), s.Sound(at-10*minute.MicrosPerMinute)
	if fmt.Sprint(got.Values) != fmt.Sprint(want.Values) {
		t.Errorf("got %v, want %v", got.Values, want.Values)
	}
}

func TestAddFaultRefuses(t *testing.T) {
	s := stationOf(t, 1, 1)
	for _, c := range []struct {
		fault Fault
		want  string
	}{
		{Fault{Kind: 99, From: 0, To: 1}, "not in the catalogue"},
		{Fault{Kind: rules.Noise, Instrument: "G1", From: 5, To: 5}, "ends before it begins"},
		{Fault{Kind: rules.Noise, Instrument: "G9", From: 0, To: 5}, "has it at one of"},
		{Fault{Kind: rules.ShadeOff, Instrument: "G1", From: 0, To: 5}, "[D1]"},
		{Fault{Kind: rules.PointingLost, Instrument: "P1", From: 0, To: 5}, "[tracker]"},
		{Fault{Kind: rules.ChannelsSwapped, Instrument: "G1", With: "L1", From: 0, To: 5}, "of the same kind"},
		{Fault{Kind: rules.Noise, Instrument: "G1", From: 0, To: 5, Amount: math.NaN()}, "finite"},
	} {
		if err := s.AddFault(c.fault); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v: %v, want %q", c.fault, err, c.want)
		}
	}
	if len(s.Faults()) != 0 {
		t.Errorf("a refused fault was kept: %v", s.Faults())
	}
}
