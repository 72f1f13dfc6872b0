package fault

import (
	"math"
	"testing"

	"fluxwarden/rules"
)

// One power supply for two fans, or one fan for two domes, is one fault: it is told of the first, within the hour, and ends when the fan turns.
func TestAFanThatStops(t *testing.T) {
	s := whole()
	s.Instruments[rules.Global].HasFan, s.Instruments[rules.LWDown].HasFan = true, true
	const first = int64(20600) * 1440
	w := NewWatcher(s, first/1440, nil, nil)
	for k := range int64(300) {
		m := Minute{Minute: first + k, Records: 1, ZenithDeg: 120, SaWm2: 1361, BodyC: math.NaN(), NetWm2: math.NaN(), PrecipitationMM: math.NaN()}
		for q := range m.Value {
			m.Value[q], m.Run[q] = float64(q)+0.01*float64(k%7), 1
		}
		state := HouseSound
		if k >= 60 && k < 200 {
			state = HouseOut
		}
		m.Fan[rules.Global], m.Fan[rules.LWDown] = state, state
		w.Minute(&m)
	}
	got := w.Episodes()
	if len(got) != 1 || got[0].Kind != rules.VentilationLost || got[0].Instrument != "G1" || got[0].Severity != rules.Act {
		t.Fatalf("%+v", got)
	}
	if e := got[0]; e.From != first+60 || e.Raised > first+80 || e.To != first+200 {
		t.Errorf("from %d, raised %d, to %d", e.From-first, e.Raised-first, e.To-first)
	}
}
