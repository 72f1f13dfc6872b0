package fault_test

import (
	"cmp"
	"flag"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/synth"
	"fluxwarden/rules"
)

// A trial is one fault that is put into a station on purpose.
type trial struct {
	kind       rules.FaultKind
	instrument string
	amount     float64
	towards    float64
	sunHour    float64 // solar hour of the first day at which it begins
	hours      int
	minutes    int  // besides the hours
	jumps      bool // the stamps show the clock's jump: a hole, or stamps that come twice
	only       synth.Climate
}

const day = 24

// The trials of every kind. Amounts are the synthetic station's usual ones unless given.
var trials = []trial{
	{kind: rules.SignalLost, instrument: "G1", amount: 2, sunHour: 9, hours: 20},
	{kind: rules.SignalLost, instrument: "P1", sunHour: 10, hours: 20},
	{kind: rules.SignalLost, instrument: "D1", amount: 1, sunHour: 13, hours: 24},
	{kind: rules.SignalLost, instrument: "L1", sunHour: 22, hours: 8},
	{kind: rules.SignalFrozen, instrument: "G1", sunHour: 11, hours: 24},
	{kind: rules.SignalFrozen, instrument: "D1", sunHour: 14, hours: 24},
	{kind: rules.SignalFrozen, instrument: "L1", sunHour: 3, hours: 10},
	{kind: rules.DataGap, sunHour: 8, hours: 5},
	{kind: rules.DataGap, sunHour: 23, hours: 2},
	{kind: rules.Noise, instrument: "G1", sunHour: 8, hours: 40},
	{kind: rules.Noise, instrument: "P1", sunHour: 8, hours: 40},
	{kind: rules.Noise, instrument: "D1", sunHour: 20, hours: 40},
	{kind: rules.RangeClipped, instrument: "G1", sunHour: 6, hours: 3 * day},
	{kind: rules.PolarityReversed, instrument: "G1", sunHour: 9, hours: 2 * day},
	{kind: rules.PolarityReversed, instrument: "D1", sunHour: 12, hours: 2 * day},
	{kind: rules.UnitSlip, instrument: "G1", sunHour: 9, hours: 2 * day},
	{kind: rules.UnitSlip, instrument: "P1", sunHour: 9, hours: 2 * day},
	{kind: rules.UnitSlip, instrument: "D1", sunHour: 9, hours: 2 * day},
	{kind: rules.ChannelsSwapped, instrument: "G1", sunHour: 10, hours: 3 * day},
	{kind: rules.ClockShift, amount: 600, sunHour: 5, hours: 4 * day, jumps: true},
	{kind: rules.ClockShift, amount: -1500, sunHour: 12, hours: 4 * day, jumps: true},
	{kind: rules.ClockShift, amount: 900, sunHour: 2, hours: 6 * day},
	{kind: rules.PointingLost, sunHour: 9, hours: 4 * day},
	{kind: rules.PointingLost, amount: 6, sunHour: 12, hours: 4 * day},
	{kind: rules.PointingLost, amount: 2.5, sunHour: 8, hours: 6 * day},
	{kind: rules.PointingLost, amount: 4, sunHour: 8, hours: 6 * day},
	{kind: rules.ShadeOff, instrument: "D1", sunHour: 8, hours: 3 * day},
	{kind: rules.ShadeOff, instrument: "D1", amount: 0.5, sunHour: 8, hours: 3 * day},
	{kind: rules.DomeWet, instrument: "G1", amount: 0.3, sunHour: 6, hours: 5},
	{kind: rules.DomeWet, instrument: "L1", sunHour: 21, hours: 11},
	{kind: rules.DomeSnow, instrument: "G1", sunHour: 4, hours: 2 * day, only: synth.Polar},
	{kind: rules.DomeSnow, instrument: "D1", sunHour: 4, hours: 2 * day, only: synth.Polar},
	{kind: rules.DomeSoiled, instrument: "G1", amount: 0.12, sunHour: 0, hours: 10 * day},
	{kind: rules.DomeFouled, instrument: "G1", sunHour: 10, hours: 2 * day},
	{kind: rules.SensorTilted, instrument: "G1", amount: 3, towards: 80, sunHour: 7, hours: 6 * day},
	{kind: rules.SensorTilted, instrument: "G1", amount: 4, towards: 240, sunHour: 12, hours: 6 * day},
	{kind: rules.SensitivityWrong, instrument: "G1", amount: 0.08, sunHour: 9, hours: 6 * day},
	{kind: rules.SensitivityWrong, instrument: "P1", amount: -0.1, sunHour: 9, hours: 6 * day},
	{kind: rules.SensitivityWrong, instrument: "D1", amount: 0.15, sunHour: 9, hours: 6 * day},
	{kind: rules.SensitivityDrift, instrument: "G1", amount: -0.08, sunHour: 0, hours: 10 * day},
	{kind: rules.ZeroOffset, instrument: "G1", amount: -14, sunHour: 15, hours: 2 * day},
	{kind: rules.ZeroOffset, instrument: "D1", amount: 12, sunHour: 20, hours: 2 * day},
	{kind: rules.VentilationLost, instrument: "G1", sunHour: 15, hours: 3 * day},
	{kind: rules.ThermistorBad, instrument: "L1", sunHour: 13, hours: day},
	{kind: rules.ThermistorBad, instrument: "L1", amount: -30, sunHour: 1, hours: day},
	{kind: rules.Shadow, instrument: "P1", amount: 3, sunHour: 9, hours: 8 * day},
	{kind: rules.InstrumentTouched, instrument: "G1", sunHour: 11, minutes: 12},
	{kind: rules.InstrumentTouched, instrument: "D1", sunHour: 13, minutes: 7},
	{kind: rules.InstrumentTouched, instrument: "P1", sunHour: 10, minutes: 9},

	// Instruments and amounts that few tests reach, at one stand.
	{kind: rules.SignalLost, instrument: "R1", amount: 2, sunHour: 9, hours: 20, only: synth.Desert},
	{kind: rules.SignalLost, instrument: "L1", amount: 2, sunHour: 9, hours: 20, only: synth.Desert},
	{kind: rules.SignalFrozen, instrument: "R1", sunHour: 11, hours: 24, only: synth.Desert},
	{kind: rules.SignalFrozen, instrument: "P1", sunHour: 11, hours: 24, only: synth.Desert},
	{kind: rules.SignalFrozen, instrument: "U1", sunHour: 11, hours: 24, only: synth.Desert},
	{kind: rules.Noise, instrument: "L1", sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.Noise, instrument: "R1", sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.RangeClipped, instrument: "P1", amount: 500, sunHour: 6, hours: 24, only: synth.Desert},
	{kind: rules.PolarityReversed, instrument: "P1", sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.PolarityReversed, instrument: "R1", sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.UnitSlip, instrument: "G1", amount: 10, sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.UnitSlip, instrument: "G1", amount: 0.1, sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.UnitSlip, instrument: "R1", sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.UnitSlip, instrument: "L1", sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.ChannelsSwapped, instrument: "P1", sunHour: 9, hours: 2 * day, only: synth.Desert}, // with diffuse
	{kind: rules.DomeSnow, instrument: "L1", sunHour: 3, hours: 30, only: synth.Desert},
	{kind: rules.SensitivityWrong, instrument: "L1", amount: 0.3, sunHour: 9, hours: 3 * day, only: synth.Desert},
	{kind: rules.SignalLost, instrument: "V1", sunHour: 9, hours: 20, only: synth.Desert},
	{kind: rules.SignalLost, instrument: "Q1", sunHour: 9, hours: 20, only: synth.Desert},
	{kind: rules.SignalFrozen, instrument: "V1", sunHour: 10, hours: 24, only: synth.Desert},
	{kind: rules.SignalFrozen, instrument: "Q1", sunHour: 10, hours: 24, only: synth.Desert},
	{kind: rules.PolarityReversed, instrument: "Q1", sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.PolarityReversed, instrument: "V1", sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.UnitSlip, instrument: "R1", amount: 1000, sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.UnitSlip, instrument: "Q1", amount: 1000, sunHour: 9, hours: 24, only: synth.Desert},
	{kind: rules.DomeSoiled, instrument: "P1", amount: 0.15, sunHour: 0, hours: 10 * day, only: synth.Desert},
	{kind: rules.ZeroOffset, instrument: "R1", amount: -20, sunHour: 15, hours: 2 * day, only: synth.Desert},
	{kind: rules.ZeroOffset, instrument: "P1", sunHour: 15, hours: 2 * day, only: synth.Desert},
	{kind: rules.ThermistorBad, instrument: "U1", sunHour: 13, hours: day, only: synth.Desert},
}

const (
	historyDays = 14
	trialDays   = 12
)

// A score is what became of the trials of one kind.
type score struct {
	of, found, where int
	named            float64 // half where it is the one that is also suspected
	invented         int     // other episodes that the sound station does not have
	lingers          int     // right ones that outlive their cause by more than a day
	delays           []int   // spoilt minutes before it was raised
}

// slow kinds may be dated back further than the fault.
func slow(k rules.FaultKind) bool { return k.Entry().Slow }

// standsFor says whether an episode of the kind is right for the fault: the data cannot tell a web on the dome from a gain, nor dirt from a drift.
func standsFor(got, want rules.FaultKind) bool {
	switch want {
	case rules.DomeFouled:
		return got == want || got == rules.SensitivityWrong || got == rules.DomeSnow
	case rules.DomeSoiled, rules.SensitivityDrift:
		return got == rules.DomeSoiled || got == rules.SensitivityDrift || got == rules.SensitivityWrong
	}
	return got == want
}

// rightPlace says whether the episode's instrument is the fault's, or one that the same cause upsets.
func (f *trial) rightPlace(instrument string) bool {
	switch f.kind {
	case rules.PointingLost:
		return instrument == fault.Tracker || instrument == "P1" || instrument == "D1"
	case rules.ShadeOff:
		return instrument == "D1" || instrument == fault.Tracker
	case rules.ChannelsSwapped:
		return instrument == "G1" || instrument == "P1" || instrument == "D1"
	case rules.ClockShift, rules.DataGap:
		return instrument == fault.Logger
	case rules.Shadow:
		return instrument == "P1" || instrument == "G1"
	}
	return instrument == f.instrument
}

// A spell is a trial in a bed: what was sent, and when it held.
type spell struct {
	trial
	from, to int // minutes of the bed
	faulty   []minute.Reading
	shift    int // minutes by which the stamps are ahead, where the jump shows
}

func (b *bed) spell(t testing.TB, f trial) spell {
	t.Helper()
	s := spell{trial: f}
	s.from = historyDays*minute.PerDay + int(60*f.sunHour-4*b.longitude)
	if s.from < historyDays*minute.PerDay {
		s.from += minute.PerDay
	}
	s.to = s.from + 60*f.hours + f.minutes
	made := b.synth()
	partner := ""
	if f.kind == rules.ChannelsSwapped {
		partner = "D1"
	}
	if err := made.AddFault(synth.Fault{Kind: f.kind, Instrument: f.instrument, With: partner, From: b.stamp(s.from), To: b.stamp(s.to), Amount: f.amount, TowardsDeg: f.towards}); err != nil {
		t.Fatal(err)
	}
	for m := s.from; m < s.to; m++ {
		s.faulty = append(s.faulty, made.Reading(b.stamp(m)))
	}
	if f.jumps {
		s.shift = int(f.amount / 60)
	}
	return s
}

// reading is what came under the stamps of a minute. A clock that is set forward leaves a hole before, set back it writes its stamps twice;
// when it is put right it is the other way round.
func (b *bed) reading(s *spell) func(m int) []minute.Reading {
	return func(m int) []minute.Reading {
		switch {
		case s.shift > 0 && m >= s.from && m < s.from+s.shift, s.shift < 0 && m >= s.to+s.shift && m < s.to:
			return nil
		case s.shift > 0 && m >= s.to && m < s.to+s.shift:
			late := b.late(s, m)
			return []minute.Reading{late, b.sound[m]}
		case s.shift < 0 && m >= s.from+s.shift && m < s.from:
			return []minute.Reading{b.sound[m], b.late(s, m)}
		case m < s.from || m >= s.to:
			return b.sound[m : m+1]
		case len(s.faulty[m-s.from].Values) == 0:
			return nil
		}
		return s.faulty[m-s.from : m-s.from+1]
	}
}

// late is what a clock that is wrong by the shift writes under minute m: what was true when it wrote it.
func (b *bed) late(s *spell, m int) minute.Reading {
	r := b.sound[m-s.shift]
	r.At = b.stamp(m)
	return r
}

// spoilt counts the minutes from the beginning to the raising in which a value of the station is off by more than 5 W/m2 and 2 %, or missing.
func (s *spell) spoilt(b *bed, sound, got *run, raised int64) int {
	n := 0
	for m := s.from; m < s.to && int64(m) < raised-b.first*minute.PerDay; m++ {
		for q := range got.measured {
			if got.measured[q] == nil {
				continue
			}
			x, y := got.measured[q][m/minute.PerDay-historyDays][m%minute.PerDay], sound.measured[q][m/minute.PerDay-historyDays][m%minute.PerDay]
			if math.IsNaN(x) && !math.IsNaN(y) || math.Abs(x-y) > math.Max(5, 0.02*math.Abs(y)) {
				n++
				break
			}
		}
	}
	return n
}

// take adds a trial's outcome to its kind's score and tells it in a line.
func (c *score) take(b *bed, s *spell, sound, got *run) string {
	known := map[string]bool{}
	for i := range sound.episodes {
		known[sound.episodes[i].ID] = true
	}
	grace := int64(120)
	if slow(s.kind) {
		grace = 36 * 60
	}
	c.of++
	first := b.first * minute.PerDay
	var hit *fault.Episode
	var others []string
	for _, e := range got.episodes {
		switch {
		case e.Severity != rules.Act && (s.kind.Entry().Severity == rules.Act || e.Kind != s.kind):
		case known[e.ID]:
		case hit == nil && e.From >= first+int64(s.from)-grace && e.Raised >= first+int64(s.from) && e.Raised < first+int64(s.to)+60:
			hit = &e
		default:
			others = append(others, tell(&e))
		}
	}
	c.invented += len(others)
	line := fmt.Sprintf("%-17s %-3s %-7s ", s.kind, s.instrument, b.name)
	if hit == nil {
		return line + "missed" + told(others)
	}
	c.found++
	delay := s.spoilt(b, sound, got, hit.Raised)
	c.delays = append(c.delays, delay)
	verdict := "found"
	if s.rightPlace(hit.Instrument) {
		c.where++
		verdict = "found, placed"
		switch {
		case standsFor(hit.Kind, s.kind):
			c.named++
			verdict = "right"
		case slices.Contains(hit.Also, s.kind):
			c.named += 0.5
			verdict = "half right"
		}
	}
	lingers := ""
	if end := first + int64(s.to); hit.To > end+minute.PerDay {
		lingers = " LINGERS"
		c.lingers++
	}
	return line + fmt.Sprintf("%-13s %5d min: %s%s%s", verdict, delay, tell(hit), lingers, told(others))
}

func told(others []string) string {
	if len(others) == 0 {
		return ""
	}
	return "\n      beside it: " + strings.Join(others, "\n      beside it: ")
}

func (c *score) delay() string {
	if len(c.delays) == 0 {
		return "-"
	}
	slices.Sort(c.delays)
	return fmt.Sprint(c.delays[len(c.delays)/2])
}

// A floor is what a kind reaches; a change that falls below it, or invents more, is a step back. The counts are of the trials above at every stand.
type floor struct {
	found, where int
	named        float64
	invented     int // at most
	lingers      int // at most
}

// floors is what was reached when it was written down last. Raise a floor with the change that lifts it.
var floors = [rules.FaultKindCount]floor{
	rules.SignalLost:        {19, 19, 17, 0, 0},
	rules.SignalFrozen:      {17, 17, 17, 0, 0},
	rules.DataGap:           {8, 8, 8, 0, 0},
	rules.Noise:             {12, 12, 12, 5, 0},
	rules.RangeClipped:      {5, 5, 4, 0, 0},
	rules.PolarityReversed:  {12, 12, 12, 0, 0},
	rules.UnitSlip:          {17, 17, 14, 0, 0},
	rules.ChannelsSwapped:   {5, 5, 3, 4, 0},
	rules.ClockShift:        {11, 7, 7, 2, 0},
	rules.PointingLost:      {14, 14, 14, 3, 2},
	rules.ShadeOff:          {8, 8, 8, 4, 0},
	rules.DomeWet:           {7, 7, 7, 0, 0},
	rules.DomeSnow:          {3, 2, 1, 0, 0},
	rules.DomeSoiled:        {4, 3, 3, 2, 1},
	rules.DomeFouled:        {4, 3, 3, 3, 1},
	rules.SensorTilted:      {8, 7, 6.5, 5, 0},
	rules.SensitivityWrong:  {12, 11, 8, 2, 0},
	rules.SensitivityDrift:  {4, 4, 4, 1, 1},
	rules.ZeroOffset:        {8, 8, 8, 0, 0},
	rules.VentilationLost:   {4, 4, 4, 0, 0},
	rules.ThermistorBad:     {8, 8, 8, 0, 0},
	rules.Shadow:            {4, 4, 4, 0, 3},
	rules.InstrumentTouched: {4, 4, 4, 0, 0},
}

// onlyTrials picks some kinds; then no floor is asked for.
var onlyTrials = flag.String("trials", "", "kinds of the labelled trials to run; all of them otherwise")

// TestSyntheticFaults puts every kind of fault into synthetic stations of four climates, after two weeks in which they were sound, and prints
// what the diagnosis makes of it:
//
//	go test -v -run TestSyntheticFaults ./qc/fault
func TestSyntheticFaults(t *testing.T) {
	stands := []stand{moor, plain, island, fjord}
	lines := make([][]string, len(stands))
	scores := make([][rules.FaultKindCount]score, len(stands))
	t.Run("stands", func(t *testing.T) {
		for i := range stands {
			t.Run(stands[i].name, func(t *testing.T) {
				t.Parallel()
				lines[i] = labelledAt(t, &stands[i], &scores[i])
			})
		}
	})
	table := fmt.Sprintf("\n%-18s %6s %6s %6s %6s %9s %8s %s\n", "kind", "trials", "found", "where", "named", "invented", "lingers", "delay, spoilt min (median)")
	var all score
	for k := range rules.FaultKind(rules.FaultKindCount) {
		var c score
		for i := range scores {
			c.join(&scores[i][k])
		}
		all.join(&c)
		table += fmt.Sprintf("%-18s %6d %6d %6d %6.1f %9d %8d %s\n", k, c.of, c.found, c.where, c.named, c.invented, c.lingers, c.delay())
		if f := floors[k]; *onlyTrials == "" && (c.found < f.found || c.where < f.where || c.named < f.named || c.invented > f.invented || c.lingers > f.lingers) {
			t.Errorf("%s: found %d, placed %d, named %v, invented %d, lingers %d; it was %+v", k, c.found, c.where, c.named, c.invented, c.lingers, f)
		}
	}
	table += fmt.Sprintf("%-18s %6d %6d %6d %6.1f %9d %8d %s\n", "all", all.of, all.found, all.where, all.named, all.invented, all.lingers, all.delay())
	told := slices.Concat(lines...)
	slices.SortStableFunc(told, func(a, b string) int { return cmp.Compare(kindOf(a), kindOf(b)) })
	t.Log(table + "\n" + strings.Join(told, "\n"))
}

func kindOf(line string) rules.FaultKind {
	k, _ := rules.ParseFaultKind(strings.Fields(line)[0])
	return k
}

func (c *score) join(o *score) {
	c.of, c.found, c.where, c.named, c.invented, c.lingers = c.of+o.of, c.found+o.found, c.where+o.where, c.named+o.named, c.invented+o.invented, c.lingers+o.lingers
	c.delays = append(c.delays, o.delays...)
}

func labelledAt(t *testing.T, s *stand, scores *[rules.FaultKindCount]score) []string {
	b := newBed(t, s, 3, historyDays+trialDays)
	history := b.judge(nil, 0, historyDays, false, b.soundReading).history
	sound := b.judge(history, historyDays, historyDays+trialDays, true, b.soundReading)
	var lines []string
	for _, f := range trials {
		if f.only.Name != "" && f.only.Name != s.climate.Name || *onlyTrials != "" && !strings.Contains(*onlyTrials, f.kind.String()) {
			continue
		}
		p := b.spell(t, f)
		end := min((p.to+36*60)/minute.PerDay+1, historyDays+trialDays)
		got := b.judge(history, historyDays, end, true, b.reading(&p))
		for i := range got.episodes {
			if err := wellFormed(&got.episodes[i]); err != nil {
				t.Error(err)
			}
		}
		lines = append(lines, scores[f.kind].take(b, &p, &sound, &got))
	}
	return lines
}
