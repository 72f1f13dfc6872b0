package synth

import (
	"fmt"
	"math"
	"slices"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// Tracker and Logger stand where a fault is not one instrument's.
const (
	Tracker = "tracker"
	Logger  = "logger"
)

// A Fault is one that is put into a station on purpose: its kind, where, when and how much.
type Fault struct {
	Kind       rules.FaultKind
	Instrument string       // an id of the station, Tracker or Logger
	With       string       // the other instrument of channels_swapped
	From, To   minute.Stamp // records whose time begins in [From, To) have it
	// Amount is how much, in the unit of AmountUnit; 0 stands for a usual one.
	Amount float64
	// TowardsDeg is the azimuth, from north clockwise, towards which sensor_tilted leans or in which the obstacle of shadow stands.
	// For shadow 0 means where the sun is at From.
	TowardsDeg float64
}

// A kindOfFault says what an amount means and who can have it.
type kindOfFault struct {
	usual float64
	unit  string
	on    func(in *rules.Instrument) bool // nil where it is the tracker's or the logger's
	who   string                          // Tracker or Logger where on is nil
}

func anyInstrument(*rules.Instrument) bool { return true }

func shortwave(in *rules.Instrument) bool { return in.Measures.Shortwave() }

func domed(in *rules.Instrument) bool {
	return in.Measures != rules.LWUp && in.Measures != rules.Reflected
}

func facesSky(in *rules.Instrument) bool {
	return in.Measures == rules.Global || in.Measures == rules.Diffuse || in.Measures == rules.UV || in.Measures == rules.PAR
}

func beamReaches(in *rules.Instrument) bool {
	return in.Measures == rules.Direct || facesSky(in) && in.Measures != rules.Diffuse
}

func levelled(in *rules.Instrument) bool { return beamReaches(in) && in.Measures != rules.Direct }

func isDiffuse(in *rules.Instrument) bool { return in.Measures == rules.Diffuse }

func bodyMeasured(in *rules.Instrument) bool { return in.Input.Case != "" }

func cooled(in *rules.Instrument) bool { return facesSky(in) || in.Measures == rules.LWDown }

// kinds is indexed by kind. The usual amounts are our own choice: plainly wrong, not grotesque.
var kinds = [rules.FaultKindCount]kindOfFault{
	rules.SignalLost:        {0, "W/m2 that an open input floats by; 0 leaves the channel out", anyInstrument, ""},
	rules.SignalFrozen:      {0, "none", anyInstrument, ""},
	rules.DataGap:           {0, "none", nil, Logger},
	rules.Noise:             {40, "W/m2", anyInstrument, ""},
	rules.RangeClipped:      {600, "W/m2", anyInstrument, ""},
	rules.PolarityReversed:  {0, "none", shortwave, ""},
	rules.UnitSlip:          {0.001, "factor", anyInstrument, ""},
	rules.ChannelsSwapped:   {0, "none", anyInstrument, ""},
	rules.ClockShift:        {600, "s that the clock is ahead", nil, Logger},
	rules.PointingLost:      {0, "degrees that the azimuth axis is off; 0 is a tracker that stands still", nil, Tracker},
	rules.ShadeOff:          {1, "share of the beam", isDiffuse, ""},
	rules.DomeWet:           {0.2, "share of the beam that is scattered", domed, ""},
	rules.DomeSnow:          {0.7, "share of the light kept off", domed, ""},
	rules.DomeSoiled:        {0.08, "share of the light kept off at the end", domed, ""},
	rules.DomeFouled:        {0.3, "share of the beam kept off with the sun behind it", domed, ""},
	rules.SensorTilted:      {3, "degrees", levelled, ""},
	rules.SensitivityWrong:  {0.06, "share that it reads too much", anyInstrument, ""},
	rules.SensitivityDrift:  {-0.05, "share at the end", anyInstrument, ""},
	rules.ZeroOffset:        {-14, "W/m2", anyInstrument, ""},
	rules.VentilationLost:   {2.5, "times the usual zero offset", cooled, ""},
	rules.ThermistorBad:     {6, "K", bodyMeasured, ""},
	rules.Shadow:            {6, "degrees of azimuth to either side", beamReaches, ""},
	rules.InstrumentTouched: {0.6, "share of the light that a hand keeps off at most", shortwave, ""},
}

// AmountUnit says what a Fault's Amount counts, and the amount that stands for 0.
func AmountUnit(kind rules.FaultKind) (unit string, usual float64) {
	return kinds[kind].unit, kinds[kind].usual
}

// CanHave lists who can have a fault of the kind at the station: ids of instruments, or Tracker or Logger.
func (s *Station) CanHave(kind rules.FaultKind) []string {
	k := &kinds[kind]
	if k.on == nil {
		return []string{k.who}
	}
	var ids []string
	for i := range s.rules.Instruments {
		in := &s.rules.Instruments[i]
		if k.on(in) && (kind != rules.ChannelsSwapped || s.partner(i, "") >= 0) {
			ids = append(ids, in.ID)
		}
	}
	return ids
}

// An activeFault is a fault with what it needs at hand.
type activeFault struct {
	Fault
	instrument int     // -1 for the tracker's and the logger's
	partner    int     // of a swap
	stopped    now     // where the sun stood when a tracker stopped, or behind what fell on a dome
	onWindow   bool    // it fell on a pyrheliometer's window
	held       *sensed // what a frozen input stands at
	chance     source
}

// AddFault puts a fault into the station. It refuses what the station cannot have. Of several faults all take effect.
func (s *Station) AddFault(f Fault) error {
	if int(f.Kind) >= rules.FaultKindCount {
		return fmt.Errorf("fault: kind %d: it is not in the catalogue", f.Kind)
	}
	if f.From >= f.To {
		return fmt.Errorf("fault: %s: it ends before it begins: give From before To", f.Kind)
	}
	if math.IsNaN(f.Amount) || math.IsInf(f.Amount, 0) || math.IsNaN(f.TowardsDeg) || math.IsInf(f.TowardsDeg, 0) {
		return fmt.Errorf("fault: %s: the amount and the direction must be finite numbers", f.Kind)
	}
	able := s.CanHave(f.Kind)
	if f.Instrument == "" && kinds[f.Kind].on == nil {
		f.Instrument = kinds[f.Kind].who
	}
	if !slices.Contains(able, f.Instrument) {
		return fmt.Errorf("fault: %s of %q: station %s has it at one of %v", f.Kind, f.Instrument, s.rules.ID, able)
	}
	if f.Amount == 0 {
		f.Amount = kinds[f.Kind].usual
	}
	a := activeFault{Fault: f, instrument: s.index(f.Instrument), partner: -1, chance: s.chance.equipment.named(f.Kind.String()).named(f.Instrument)}
	switch f.Kind {
	case rules.ChannelsSwapped:
		if a.partner = s.partner(a.instrument, f.With); a.partner < 0 {
			return fmt.Errorf("fault: %s of %s with %q: name another instrument whose input is of the same kind", f.Kind, f.Instrument, f.With)
		}
	case rules.PointingLost:
		a.stopped = s.skyAt(f.From)
	case rules.DomeFouled:
		a.stopped = s.skyAt(f.From)
		a.onWindow = s.rules.Instruments[a.instrument].Measures == rules.Direct
	case rules.Shadow:
		if f.TowardsDeg == 0 {
			a.TowardsDeg = s.azimuthAt(f.From)
		}
	case rules.SignalFrozen:
		first := s.Next(f.From)
		all, _, _ := s.sense(first, true)
		a.held = &all[a.instrument]
	}
	s.faults = append(s.faults, a)
	return nil
}

// Faults lists the faults put in, their usual amounts filled in.
func (s *Station) Faults() []Fault {
	out := make([]Fault, len(s.faults))
	for i := range s.faults {
		out[i] = s.faults[i].Fault
	}
	return out
}

func (s *Station) index(id string) int {
	return slices.IndexFunc(s.rules.Instruments, func(in rules.Instrument) bool { return in.ID == id })
}

// partner finds the instrument to swap with: the one named, or the first of the same kind of radiation.
func (s *Station) partner(i int, id string) int {
	own := &s.rules.Instruments[i]
	for j := range s.rules.Instruments {
		other := &s.rules.Instruments[j]
		same := own.Measures.Longwave() == other.Measures.Longwave() && (own.Input.Signal == "") == (other.Input.Signal == "")
		if j != i && same && (id == other.ID || id == "" && own.Measures != other.Measures) {
			return j
		}
	}
	return -1
}

// Channels lists the channels whose values the fault can change.
func (s *Station) Channels(f Fault) []string {
	var out []string
	for i := range s.rules.Instruments {
		in := &s.rules.Instruments[i]
		part := in.ID == f.Instrument
		switch f.Kind {
		case rules.DataGap, rules.ClockShift:
			part = true
		case rules.PointingLost:
			part = in.Measures == rules.Direct || in.Measures == rules.Diffuse
		case rules.ChannelsSwapped:
			part = part || i == s.partner(s.index(f.Instrument), f.With)
		}
		if !part {
			continue
		}
		if f.Kind != rules.ThermistorBad {
			out = append(out, in.Input.Signal+in.Input.Irradiance) // one of them is empty
		}
		if whole := f.Kind == rules.DataGap || f.Kind == rules.ClockShift || f.Kind == rules.SignalFrozen; whole || f.Kind == rules.ThermistorBad {
			out = append(out, in.Input.Case)
			if whole {
				out = append(out, in.Input.Dome)
			}
		}
	}
	if f.Kind == rules.DataGap || f.Kind == rules.ClockShift {
		for _, w := range s.rules.Weather {
			out = append(out, w.Channel)
		}
	}
	for _, h := range s.rules.Housekeeping {
		if f.Kind == rules.DataGap || f.Kind == rules.ClockShift || f.Kind == rules.VentilationLost || f.Kind == rules.PointingLost {
			out = append(out, h.Channel)
		}
	}
	return slices.DeleteFunc(out, func(c string) bool { return c == "" })
}
