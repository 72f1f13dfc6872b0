package fault

import (
	"math"
	"testing"

	"fluxwarden/rules"
)

// Who an episode is about: its own instrument; of the tracker what it carries; of the logger every irradiance and no weather.
func TestConcerns(t *testing.T) {
	s := whole()
	s.Instruments[rules.UV] = Instrument{}
	for _, c := range []struct {
		who        string
		kind       rules.FaultKind
		instrument string
		quantity   rules.Quantity
		want       bool
	}{
		{"G1", rules.Noise, "G1", rules.Global, true},
		{"G1", rules.Noise, "G2", rules.Global, false},
		{"G1", rules.Noise, "D1", rules.Diffuse, false},
		{Tracker, rules.PointingLost, "P1", rules.Direct, true},
		{Tracker, rules.PointingLost, "D1", rules.Diffuse, true},
		{Tracker, rules.PointingLost, "G1", rules.Global, false},
		{Tracker, rules.PointingLost, "L1", rules.LWDown, false},
		{Logger, rules.ClockShift, "G1", rules.Global, true},
		{Logger, rules.ClockShift, "L1", rules.LWDown, true},
		{Logger, rules.DataGap, "ta_c", rules.AirTemperature, false},
		{"G1", rules.ChannelsSwapped, "G1", rules.Global, true},
		{"G1", rules.ChannelsSwapped, "D1", rules.Diffuse, true},
		{"G1", rules.ChannelsSwapped, "G2", rules.Global, false},
		{"G1", rules.ChannelsSwapped, "P1", rules.Direct, false},
	} {
		e := &Episode{Instrument: c.who, Kind: c.kind}
		if got := Concerns(e, s, c.instrument, c.quantity); got != c.want {
			t.Errorf("%s of %s concerns %s: %v", c.kind, c.who, c.instrument, got)
		}
	}
}

// Which minutes an episode spoils: a clip its rail, what the sun brings to light the sunlit ones, a shadow its bearing, the others all.
func TestReaches(t *testing.T) {
	number := func(name string, v float64) Evidence { return Evidence{Name: name, Value: v} }
	rail := []Evidence{number("minutes", 30), number("rail", 800)}
	mast := []Evidence{number("bearing_from", 110), number("bearing_to", 116)}
	for _, c := range []struct {
		kind                      rules.FaultKind
		evidence                  []Evidence
		quantity                  rules.Quantity
		measured, zenith, azimuth float64
		want                      bool
	}{
		{rules.RangeClipped, rail, rules.Global, 800, 40, 180, true},
		{rules.RangeClipped, rail, rules.Global, 799.5, 40, 180, true},
		{rules.RangeClipped, rail, rules.Global, 798, 40, 180, false},
		{rules.RangeClipped, rail, rules.Global, math.NaN(), 40, 180, false},
		{rules.RangeClipped, nil, rules.Global, 1000, 40, 180, false},
		{rules.SensorTilted, nil, rules.Global, 500, 90.9, 180, true},
		{rules.SensorTilted, nil, rules.Global, 500, 91, 180, false},
		{rules.PointingLost, nil, rules.Direct, 0, 120, 0, false},
		{rules.ShadeOff, nil, rules.Diffuse, 300, 60, 0, true},
		{rules.SensitivityWrong, nil, rules.Global, 0, 100, 0, false},
		{rules.SensitivityWrong, nil, rules.LWDown, 300, 100, 0, true},
		{rules.PolarityReversed, nil, rules.Global, -300, 50, 90, true},
		{rules.DomeWet, nil, rules.LWDown, 300, 130, 0, true},
		{rules.DomeWet, nil, rules.Global, 3, 130, 0, false},
		{rules.DomeSnow, nil, rules.Global, 30, 60, 0, true},
		{rules.ClockShift, nil, rules.Global, 30, 96.9, 0, true},
		{rules.ClockShift, nil, rules.Global, 30, 97, 0, false},
		{rules.ClockShift, nil, rules.LWDown, 300, 120, 0, true},
		{rules.Shadow, mast, rules.Direct, 10, 50, 113, true},
		{rules.Shadow, mast, rules.Direct, 10, 50, 110, true},
		{rules.Shadow, mast, rules.Direct, 10, 50, 109.9, false},
		{rules.Shadow, mast, rules.Direct, 10, 50, 116.1, false},
		{rules.Shadow, mast, rules.Direct, 10, 92, 113, false},
		{rules.Shadow, nil, rules.Direct, 10, 50, 113, false},
		{rules.SignalLost, nil, rules.Global, 0, 130, 0, true},
		{rules.SignalFrozen, nil, rules.Global, 300, 130, 0, true},
		{rules.Noise, nil, rules.Global, 20, 130, 0, true},
		{rules.ZeroOffset, nil, rules.Global, 20, 130, 0, true},
		{rules.ThermistorBad, nil, rules.LWDown, 20, 130, 0, true},
	} {
		e := &Episode{Kind: c.kind, Evidence: c.evidence}
		if got := Reaches(e, c.quantity, c.measured, c.zenith, c.azimuth); got != c.want {
			t.Errorf("%s at %v degrees from the zenith, bearing %v, %v W/m2 of %s: %v", c.kind, c.zenith, c.azimuth, c.measured, c.quantity, got)
		}
	}
}

// What a fault hides is given back where it can be worked out, and only there.
func TestRestore(t *testing.T) {
	s := whole() // 8 uV/(W/m2) of global, 10 of diffuse
	values := map[rules.Quantity]float64{rules.Global: 120, rules.Diffuse: 640}
	measured := func(q rules.Quantity) float64 {
		if v, ok := values[q]; ok {
			return v
		}
		return math.NaN()
	}
	offset := []Evidence{{"minutes", 60, "min"}, {"offset", -14.5, "W/m2"}}
	for _, c := range []struct {
		kind     rules.FaultKind
		evidence []Evidence
		quantity rules.Quantity
		want     float64
		ok       bool
	}{
		{rules.PolarityReversed, nil, rules.Global, -120, true},
		{rules.PolarityReversed, nil, rules.Direct, 0, false},
		{rules.ZeroOffset, offset, rules.Global, 134.5, true},
		{rules.ZeroOffset, nil, rules.Global, 0, false},
		{rules.ChannelsSwapped, nil, rules.Global, 640 * 10 / 8.0, true},
		{rules.ChannelsSwapped, nil, rules.Diffuse, 120 * 8 / 10.0, true},
		{rules.SignalLost, nil, rules.Global, 0, false},
		{rules.DomeSnow, nil, rules.Global, 0, false},
		{rules.SensorTilted, nil, rules.Global, 0, false},
	} {
		got, ok := Restore(&Episode{Kind: c.kind, Evidence: c.evidence}, c.quantity, s, measured)
		if ok != c.ok || ok && math.Abs(got-c.want) > 1e-9 {
			t.Errorf("%s of %s: %v %v, want %v %v", c.kind, c.quantity, got, ok, c.want, c.ok)
		}
	}
}

// With voltages the coefficients stayed at the channels, so the two factors undo each other; a logger that converts has none.
func TestSwapFactors(t *testing.T) {
	s := whole()
	toG, toD := s.swapFactors()
	if math.Abs(toG-1.25) > 1e-12 || math.Abs(toD-0.8) > 1e-12 || math.Abs(toG*toD-1) > 1e-12 {
		t.Errorf("8 and 10 uV/(W/m2) swap by %v and %v", toG, toD)
	}
	true640, true120 := 640.0, 120.0 // global and diffuse as they were; their volts went to the other's channel
	measuredG, measuredD := true120*10/8, true640*8/10
	if math.Abs(measuredD*toG-true640) > 1e-9 || math.Abs(measuredG*toD-true120) > 1e-9 {
		t.Errorf("back come %v and %v", measuredD*toG, measuredG*toD)
	}
	s.Instruments[rules.Diffuse].Volts = false
	if toG, toD := s.swapFactors(); toG != 1 || toD != 1 {
		t.Errorf("converted values swap by %v and %v", toG, toD)
	}
}

// A cause explains its symptoms: what the same instrument would say of another kind, and what rests on how the three close while one of them
// is upset. It explains nothing while it is only watched, and a gap explains nothing.
func TestExplains(t *testing.T) {
	act := func(who string, kind rules.FaultKind) Episode {
		return Episode{Instrument: who, Kind: kind, Severity: rules.Act}
	}
	watched := act("G1", rules.DomeSnow)
	watched.Severity = rules.Watch
	for _, c := range []struct {
		open, e Episode
		want    bool
	}{
		{act(Tracker, rules.PointingLost), act("G1", rules.SensitivityWrong), true},
		{act(Tracker, rules.PointingLost), act("P1", rules.SignalLost), true},
		{act("G1", rules.DomeSnow), act("D1", rules.ShadeOff), true},
		{act("G1", rules.SignalFrozen), act("G1", rules.RangeClipped), true},
		{act("G1", rules.SensorTilted), act("G1", rules.SensorTilted), false},
		{act("G1", rules.ZeroOffset), act("G1", rules.SensitivityWrong), true},
		{act(Logger, rules.ClockShift), act("G1", rules.SensorTilted), true},
		{act(Logger, rules.DataGap), act("G1", rules.SensorTilted), false},
		{act(Logger, rules.ClockShift), act(Logger, rules.DataGap), false},
		{act("G1", rules.DomeSnow), act("L1", rules.ThermistorBad), false},
		{act("L1", rules.ThermistorBad), act("G1", rules.SensorTilted), false},
		{act("G1", rules.DomeSnow), act("P1", rules.SignalFrozen), false},
		{watched, act("D1", rules.ShadeOff), false},
	} {
		if got := explains(&c.open, &c.e); got != c.want {
			t.Errorf("%s of %s explains %s of %s: %v", c.open.Kind, c.open.Instrument, c.e.Kind, c.e.Instrument, got)
		}
	}
}

// A lost or wet pyrgeometer says nothing about how global, direct and diffuse close.
func TestLongwaveExplainsNoShortwave(t *testing.T) {
	for _, kind := range []rules.FaultKind{rules.SignalLost, rules.SignalFrozen, rules.DomeWet, rules.Noise} {
		for _, who := range []string{"L1", "U1", "R1"} {
			w := NewWatcher(whole(), 20000, nil, nil)
			w.raise(Episode{Instrument: who, Kind: kind, Severity: rules.Act, From: 1, Raised: 2})
			if w.raise(Episode{Instrument: "G1", Kind: rules.SensorTilted, Severity: rules.Act, From: 1, Raised: 3}) == nil {
				t.Errorf("%s of %s hides that G1 is out of level", kind, who)
			}
		}
	}
}
