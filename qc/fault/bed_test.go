package fault_test

import (
	"fmt"
	"math"
	"slices"
	"testing"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/synth"
	"fluxwarden/rules"
)

// The test bed: invented stations under a modelled sky (qc/synth), judged by the core itself. Nothing of the diagnosis is tuned on it: it
// is here to show what breaks.

// A stand is where a synthetic station stands and what it has.
type stand struct {
	name      string
	climate   synth.Climate
	latitude  float64
	longitude float64
	elevation float64
	first     string // first day
	volts     bool   // its logger sends millivolts
	more      bool   // it has ultraviolet and photosynthetic instruments too
	without   string // instruments it has not, by the first letter of their ids, w for the weather
}

// The coordinates are nobody's: chosen for the latitude and for the hour at which their day begins.
var (
	moor   = stand{name: "moor", climate: synth.Maritime, latitude: 50.4, longitude: 6.1, elevation: 420, first: "2026-04-20", volts: true}
	plain  = stand{name: "plain", climate: synth.Desert, latitude: -24.6, longitude: 15.2, elevation: 1100, first: "2026-09-10", more: true}
	island = stand{name: "island", climate: synth.Tropical, latitude: 9.3, longitude: 164.8, elevation: 4, first: "2026-02-01", volts: true} // noon at 1 h UTC
	fjord  = stand{name: "fjord", climate: synth.Polar, latitude: 69.4, longitude: 18.2, elevation: 60, first: "2026-04-05", volts: true}
)

func (s *stand) rules(t testing.TB) *rules.Station {
	t.Helper()
	text := fmt.Sprintf("network: {id: bed, name: Test bed}\nstations:\n  - id: %s\n    latitude: %v\n    longitude: %v\n    elevation: %v\n"+
		"    time: {label: start, interval: 60s}\n    instruments:\n", s.name, s.latitude, s.longitude, s.elevation)
	from := ", calibrations: [{from: 2020-01-01, sensitivity: %v, unit: uV/(W/m2), uncertainty: 1.2%%, scale: WRR}]}\n"
	for _, in := range []struct {
		id, quantity string
		uV           float64
	}{{"G1", "global", 8.4}, {"P1", "direct", 7.9}, {"D1", "diffuse", 9.6}, {"R1", "reflected", 8.8}} {
		switch {
		case s.lacks(in.id[:1]):
		case s.volts:
			text += fmt.Sprintf("      - {id: %s, measures: %s, class: A, input: {signal: %s_mv, unit: mV}"+from, in.id, in.quantity, in.id, in.uV)
		default:
			text += fmt.Sprintf("      - {id: %s, measures: %s, class: A, input: {irradiance: %s_wm2}}\n", in.id, in.quantity, in.id)
		}
	}
	if s.more {
		text += "      - {id: V1, measures: uv, input: {irradiance: V1_wm2}}\n      - {id: Q1, measures: par, input: {irradiance: Q1_umol}}\n"
	}
	for _, id := range []string{"L1", "U1"} {
		if !s.lacks(id[:1]) {
			text += fmt.Sprintf("      - {id: %s, measures: %s, input: {signal: %s_mv, unit: mV, case: %s_c}"+from, id, map[string]string{"L1": "lw_down", "U1": "lw_up"}[id], id, id, 10.9)
		}
	}
	if !s.lacks("w") {
		text += "    weather: {air_temperature: ta_c, humidity: rh_pct, pressure: p_hpa}\n"
	}
	site, err := rules.Parse("bed.yaml", []byte(text))
	if err != nil {
		t.Fatalf("%v\n%s", err, text)
	}
	return &site.Stations[0]
}

func (s *stand) lacks(letter string) bool {
	for i := range s.without {
		if s.without[i] == letter[0] {
			return true
		}
	}
	return false
}

func dayOf(t testing.TB, date string) int64 {
	t.Helper()
	at, err := time.Parse(time.DateOnly, date)
	if err != nil {
		t.Fatal(err)
	}
	return at.Unix() / 86400
}

// A bed is one station with its sound readings over some days.
type bed struct {
	*stand
	seed    uint64
	station *rules.Station
	plan    *engine.Plan
	first   int64
	days    int
	sound   []minute.Reading // one a minute
}

func newBed(t testing.TB, s *stand, seed uint64, days int) *bed {
	t.Helper()
	b := &bed{stand: s, seed: seed, station: s.rules(t), first: dayOf(t, s.first), days: days}
	plan, err := engine.NewPlan(b.station)
	if err != nil {
		t.Fatal(err)
	}
	b.plan = plan
	made := b.synth()
	for m := range days * minute.PerDay {
		b.sound = append(b.sound, made.Reading(b.stamp(m)))
	}
	return b
}

func (b *bed) synth() *synth.Station { return synth.New(b.station, b.seed, b.climate) }

// stamp is that of minute m of the bed.
func (b *bed) stamp(m int) minute.Stamp {
	return minute.Stamp(b.first*minute.PerDay+int64(m)) * minute.MicrosPerMinute
}

// A run is what the core made of some days.
type run struct {
	history  []engine.DaySummary
	episodes []fault.Episode                   // as they stood at the end, by the minute they were raised
	measured [rules.RadiationCount][][]float64 // by quantity and day; nil where there is no such instrument
}

// judge runs days [from, to) of the readings after the history; reading gives what came for a minute. Whether it keeps what was measured
// is for the caller to say.
func (b *bed) judge(history []engine.DaySummary, from, to int, keep bool, reading func(m int) []minute.Reading) run {
	gatherer := minute.NewGatherer(b.plan.Layout())
	judger := engine.NewJudger(b.plan, history)
	block := minute.NewBlock(0, len(b.plan.Layout().Channels))
	out := run{}
	for d := from; d < to; d++ {
		batch := &minute.Batch{Station: b.station.ID}
		for m := d * minute.PerDay; m < (d+1)*minute.PerDay; m++ {
			for _, r := range reading(m) {
				batch.Append(&r)
			}
		}
		block.Reset(b.first + int64(d))
		gatherer.Fill(block, batch, 0, minute.PerDay)
		judged := judger.Begin(block.Day)
		judger.Advance(block)
		summary := judger.End()
		out.history = append(out.history, summary)
		out.episodes = append(out.episodes, summary.Closed...)
		if keep {
			for q := range out.measured {
				if s := judged.Primary(rules.Quantity(q)); s != nil {
					out.measured[q] = append(out.measured[q], slices.Clone(s.Measured))
				}
			}
		}
	}
	out.episodes = append(out.episodes, out.history[len(out.history)-1].Open...)
	slices.SortStableFunc(out.episodes, func(x, y fault.Episode) int { return int(x.Raised - y.Raised) })
	return out
}

func (b *bed) soundReading(m int) []minute.Reading { return b.sound[m : m+1] }

// acts are the episodes that somebody is sent out for.
func acts(all []fault.Episode) []fault.Episode {
	return slices.DeleteFunc(slices.Clone(all), func(e fault.Episode) bool { return e.Severity != rules.Act })
}

// tell writes an episode in a line.
func tell(e *fault.Episode) string {
	to := "open"
	if e.To != fault.Open {
		to = clock(e.To)
	}
	return fmt.Sprintf("%s %s from %s to %s, raised %s, %.3f, also %v, %v", e.Instrument, e.Kind, clock(e.From), to, clock(e.Raised), e.Confidence, e.Also, e.Evidence)
}

func clock(m int64) string { return time.Unix(60*m, 0).UTC().Format("2006-01-02 15:04") }

// wellFormed is what every episode holds, whatever came in.
func wellFormed(e *fault.Episode) error {
	switch {
	case e.ID == "" || e.Station == "" || e.Instrument == "" || e.Rev < 1:
		return fmt.Errorf("%+v: it has no name, place or revision", e)
	case e.From > e.Raised:
		return fmt.Errorf("%s: raised before it began", tell(e))
	case e.To <= e.From:
		return fmt.Errorf("%s: it ends before it begins", tell(e))
	case !(e.Confidence >= 0 && e.Confidence <= 1):
		return fmt.Errorf("%s: confidence %v", tell(e), e.Confidence)
	case len(e.Also) > 1 || slices.Contains(e.Also, e.Kind):
		return fmt.Errorf("%s: also suspected are %v", tell(e), e.Also)
	case e.Advice != e.Kind.Entry().Advice:
		return fmt.Errorf("%s: the advice is another kind's: %s", tell(e), e.Advice)
	case e.Raised-e.From > engine.HindsightDays*minute.PerDay:
		return fmt.Errorf("%s: it reaches back %d minutes", tell(e), e.Raised-e.From)
	}
	for _, x := range e.Evidence {
		if x.Name == "" || math.IsNaN(x.Value) || math.IsInf(x.Value, 0) {
			return fmt.Errorf("%s: evidence %+v", tell(e), x)
		}
	}
	return nil
}
